"""Computed figures of the criteria that are not in the tables of diffraction and turbulence.

C: computed by direct quadrature or root finding from the published formula, apart from simimg.
"""

# C. Sparrow's limit of an unequal pair in a Kolmogorov PSF, in its FWHM: the separation at which
# slope and second derivative of the sum vanish together, found by Newton's method on Hankel
# integrals of exp(-3.4419385 f^(5/3)). The same limit found by a coarse scan reads up to 0.0018
# more, as printed beside the other values of turbulence.
KOLMOGOROV_SPARROW_UNEQUAL = {0.5: 1.024697, 1.0: 1.158858, 2.0: 1.390249, 6.0: 2.469253}
KOLMOGOROV_SPARROW_UNEQUAL_RTOL = 2e-6

# C. What the coarse scan may add to it.
COARSE_SCAN_ATOL = 2e-3

# C. Gaussian: separation, in its FWHM, at which the middle of an equal pair is 0.735032 of the
# heights at the stars' places (1.1899) and of the pair's maxima, which stand a little higher and
# closer (1.1888).
GAUSSIAN_SADDLE_AT_PLACES = 1.18993
GAUSSIAN_SADDLE_AT_MAXIMA = 1.18877
GAUSSIAN_SADDLE_ATOL = 1e-5
