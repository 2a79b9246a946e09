"""Published and computed figures of diffraction; lengths in wavelength/diameter unless said.

Marks: P published; C computed by direct quadrature or root finding from the published formula, two
independent ways; M published, given from memory; T common practice of the trade, no source. Each
value carries the tolerance at which it is to be met: one unit of its last digit printed, unless
said.
"""

# P. Airy 1835; the zeros of J1 over pi.
DARK_RINGS = (1.21967, 2.23313, 3.23832)
DARK_RINGS_ATOL = 1e-5

# P. Born & Wolf, Principles of Optics, ch. 8.5.
BRIGHT_RINGS = (1.63472, 2.67929, 3.69871)
BRIGHT_RINGS_ATOL = 1e-5
BRIGHT_RING_INTENSITIES = (0.017498, 0.004158, 0.001601)
BRIGHT_RING_INTENSITIES_ATOL = 1e-6

# P. Rayleigh 1881: 1 - J0^2 - J1^2 at the dark rings.
LIGHT_INSIDE_DARK_RINGS = (0.83778, 0.90993, 0.93765)
LIGHT_INSIDE_DARK_RINGS_ATOL = 1e-5

# C.
FWHM = 1.02899
FWHM_ATOL = 1e-5

# P. Rayleigh; Born & Wolf, ch. 7.6.3: saddle over peaks of an equal pair at the first dark ring.
RAYLEIGH_SADDLE = 0.735032
RAYLEIGH_SADDLE_ATOL = 1e-6

# P. Sparrow 1916 (0.95); C for the digits.
SPARROW_EQUAL = 0.947155
SPARROW_EQUAL_ATOL = 1e-6

# C. Magnitude difference -> first separation at which an unequal pair's profile has a dip.
SPARROW_UNEQUAL = {0.5: 1.110, 1.0: 1.177}
SPARROW_UNEQUAL_ATOL = 1e-3

# C; M (Schroeder, Astronomical Optics) for the light inside the first dark ring.
# Obstruction -> first dark ring, light inside it, FWHM, Sparrow of an equal pair.
OBSTRUCTED = {
    0.1: (1.2051, 0.8184, 1.0233, 0.9436),
    0.2: (1.1665, 0.7638, 1.0068, 0.9330),
    0.3: (1.1145, 0.6824, 0.9811, 0.9155),
    0.4: (1.0577, 0.5843, 0.9486, 0.8919),
    0.5: (1.0009, 0.4786, 0.9117, 0.8631),
}
OBSTRUCTED_ATOL = 1e-4

# C. Obstruction -> separation at which an equal pair's saddle is 0.735 of its peaks.
SADDLE_SEPARATION_OBSTRUCTED = {0.3: 1.1595, 0.5: 1.0720}
SADDLE_SEPARATION_OBSTRUCTED_ATOL = 1e-4

# C, closed form (Sparrow: 2 sigma), in FWHM of a Gaussian.
GAUSSIAN_SPARROW_FWHM = 0.8493
GAUSSIAN_SADDLE_FWHM = 1.1900
GAUSSIAN_ATOL = 1e-4

# P. Dawes 1867, observers' custom: arcsec times millimetres of aperture.
DAWES_ARCSEC_MM = 116.0

# P. Goodman, Introduction to Fourier Optics: transfer function of the clear aperture at half its
# cut-off.
TRANSFER_AT_HALF_CUTOFF = 0.391002
TRANSFER_AT_HALF_CUTOFF_ATOL = 1e-6

# T. Light of a 10 m aperture over that of a 1 m aperture; exact.
LIGHT_10_M_OVER_1_M = 100.0
