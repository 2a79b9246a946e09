"""The commented scene that a newcomer begins with: a close pair over an invented station."""

from __future__ import annotations

_STARTER = """\
# A scene for simimg: what the telescope looks at, through which air, with which camera.
# The Saltmarsh station is invented; put your own numbers in its place.
#   simimg check   FILE                   what this scene means, and every mistake in it
#   simimg expose  FILE -o frame.fits     the frame that it would record
#   simimg measure frame.fits             do the two stars come apart?
# A value with a dimension is text with a unit: "0.8 arcsec", "2 m", "30 s".

title = "A close pair at Saltmarsh"

# base = "station.toml"         # lay this scene over another: what is written here comes first

[telescope]
name = "Saltmarsh 1 m"
aperture = "1.0 m"              # clear diameter
obstruction = 0.30              # central obstruction over the aperture, or a length
vanes = { count = 4, width = "10 mm", angle = "45 deg" }
throughput = 0.80               # of optics and filter
focal_length = "10 m"           # with camera.pixel_size gives the pixel scale

[air]                           # leave the table out for a telescope above the atmosphere
seeing = "1.0 arcsec"           # at 500 nm, at the zenith; or image_quality, as delivered
outer_scale = "25 m"            # leave out: infinite
airmass = 1.2                   # or altitude = "56 deg"
extinction = 0.14               # magnitudes per airmass

[band]
name = "V"                      # U B V R I J H K; or centre = "550 nm" and width = "80 nm"
system = "Vega"                 # or "AB"

[camera]
name = "Camera A"
pixels = [256, 256]             # columns, rows
pixel_size = "9 um"             # or pixel_scale = "0.19 arcsec"
quantum_efficiency = 0.85
gain = "1.4 electron/adu"
read_noise = "5 electron"
dark_current = "0.02 electron/s"
bias = "400 adu"
full_well = "90000 electron"
bit_depth = 16
# rotation = "10 deg"           # position angle of the detector's +y
# mirrored = true               # an odd number of reflections

[sky]
surface_brightness = 21.2       # magnitudes per square arcsecond

[exposure]
time = "20 s"
count = 1                       # more of them go into FRAME-000.fits, FRAME-001.fits, ...
seed = 20260412                 # the same seed gives the same noise
# start = "2026-04-12T03:00:00" # UTC

# [pointing]                    # where the field centre lies; needed for objects by ra and dec
# ra = "05:34:32"
# dec = "-05:23:28"

[header]                        # extra keywords for the frame
OBSERVER = "example"

# What is in the sky. Places: east and north from the field centre, or ra and dec, or x and y in
# pixels. Brightness: magnitude, or electrons detected per exposure.

[[pair]]
label = "pair 1"
magnitudes = [10.8, 11.6]       # first and second star
separation = "1.4 arcsec"
position_angle = "62 deg"       # of the second from the first, north through east

[[star]]
label = "reference"
east = "12 arcsec"
north = "-9 arcsec"
magnitude = 11.0

# [[galaxy]]
# east = "-10 arcsec"
# north = "8 arcsec"
# magnitude = 15.5
# sersic_index = 1.0
# effective_radius = "3 arcsec"
# axis_ratio = 0.6
# position_angle = "30 deg"
"""


def starter_text() -> str:
    """The starter scene, as TOML with comments; it is valid as it stands."""
    return _STARTER
