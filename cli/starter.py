"""The scene that `simimg begin` writes: a close pair in ordinary air, every table with a word."""

from __future__ import annotations

STARTER = """\
# A scene for simimg: what stands between the stars and the counts, table by table.
#
#   simimg check SCENE                  what it means, and every mistake in it
#   simimg expose SCENE -o FRAME.fits   the frame this set-up would record
#   simimg measure FRAME.fits           resolved or not, and how sure
#   simimg limits SCENE                 what this set-up can resolve at all
#   simimg check --schema               every key, as a JSON schema for an editor
#
# A value with a dimension is text with a unit ("0.8 arcsec"). Only magnitudes and ratios are bare
# numbers. A line that begins with # is a remark; take the # away to use what it shows.

title = "A 0.8 arcsec pair in ordinary air"

[telescope]
aperture = "2.0 m"                  # clear diameter
obstruction = 0.30                  # diameter of the central obstruction over the aperture
throughput = 0.78                   # of mirrors, lenses and filter together
# name = "Example 2 m"
# focal_length = "16 m"             # with camera.pixel_size gives the pixel scale
# vanes = { count = 4, width = "20 mm", angle = "45 deg" }

# Leave the whole table out for a telescope above the atmosphere.
[air]
seeing = "0.9 arcsec"               # FWHM of a long exposure at 500 nm, at the zenith
# image_quality = "1.0 arcsec"      # in place of seeing: the FWHM delivered in the band
outer_scale = "25 m"                # left out: infinite
airmass = 1.2                       # or altitude = "56 deg"
extinction = 0.14                   # magnitudes per airmass in the band

[band]
name = "V"                          # U B V R I J H K; or centre = "656 nm" and width = "10 nm"
system = "Vega"                     # or "AB"

[camera]
pixels = [256, 256]                 # columns, rows
pixel_scale = "0.12 arcsec"         # or pixel_size = "9 um" with telescope.focal_length
quantum_efficiency = 0.88
gain = "1.4 electron/adu"
read_noise = "5 electron"
dark_current = "0.02 electron/s"
bias = "400 adu"
full_well = "90000 electron"
bit_depth = 16
# rotation = "0 deg"                # position angle of the detector's +y
# mirrored = false                  # true after an odd number of reflections

# Leave the table out for a dark sky.
[sky]
surface_brightness = 21.4           # magnitudes per square arcsec, as observed

[exposure]
time = "30 s"
seed = 1                            # the same seed gives the same noise
# count = 4                         # so many frames: FRAME-000.fits, FRAME-001.fits, ...
# start = "2026-04-12T03:00:00"     # UTC; gives DATE-OBS

# Where the middle of the field points, for objects given by ra and dec.
# [pointing]
# ra = "12h30m00s"
# dec = "+12d24m00s"

# More keywords for the frame's header.
# [header]
# OBSERVER = "example"

# A pair: its place is the first star's, by default the middle of the field.
[[pair]]
label = "pair 1"
magnitudes = [13.2, 13.9]           # first and second star
separation = "0.8 arcsec"
position_angle = "62 deg"           # of the second about the first, north through east

[[star]]
label = "reference"
east = "8 arcsec"                   # from the middle of the field; or ra and dec, or x and y
north = "-6 arcsec"
magnitude = 14.0

# [[galaxy]]
# east = "-7 arcsec"
# north = "5 arcsec"
# magnitude = 16.0
# sersic_index = 1.0
# effective_radius = "1.5 arcsec"
# axis_ratio = 0.6
# position_angle = "30 deg"

# [[catalogue]]
# file = "stars.csv"                # ECSV, CSV, FITS or VOTable
# columns = { east = "dx", north = "dy", magnitude = "m" }
# units = { east = "arcsec", north = "arcsec" }
"""
