"""Published and computed figures of turbulence and of the air's thickness.

Marks: P published; C computed by direct quadrature or root finding from the published formula, two
independent ways; M published, given from memory. Each value carries the tolerance at which it is to
be met: one unit of its last digit printed, unless said.
"""

# P. Fried 1966 (6.88): factor of (r/r0)^(5/3). C for the digits.
KOLMOGOROV_FACTOR = 6.883877
KOLMOGOROV_FACTOR_ATOL = 1e-6

# P. Fried 1966 (0.98): long-exposure FWHM in wavelength/r0. C for the digits.
LONG_EXPOSURE_FWHM = 0.9758634
LONG_EXPOSURE_FWHM_ATOL = 1e-6

# C. Kolmogorov long exposure, in its FWHM: Sparrow of an equal pair; diameters that hold 50 and
# 80 % of the light.
KOLMOGOROV_SPARROW_FWHM = 0.8066
KOLMOGOROV_EE50_FWHM = 1.1371
KOLMOGOROV_EE80_FWHM = 1.8936
KOLMOGOROV_ATOL = 1e-4

# C. Same: magnitude difference -> Sparrow separation in FWHM.
KOLMOGOROV_SPARROW_UNEQUAL_FWHM = {0.5: 1.026, 1.0: 1.160, 2.0: 1.392, 6.0: 2.470}
KOLMOGOROV_SPARROW_UNEQUAL_ATOL = 1e-3

# P. Fried 1966 (0.445); C: long-exposure Strehl ratio of a clear aperture with D = r0.
STREHL_AT_D_EQUAL_R0 = 0.44459
STREHL_AT_D_EQUAL_R0_ATOL = 1e-5

# P. Roddier 1981: powers of wavelength and airmass with which the seeing goes.
SEEING_WAVELENGTH_POWER = -1.0 / 5.0
SEEING_AIRMASS_POWER = 3.0 / 5.0

# C from the Bessel-K form (Conan 2000): L0 = 25 m, r0 = 0.15 m; distance (m) -> rad2.
VON_KARMAN_R0, VON_KARMAN_L0 = 0.15, 25.0
VON_KARMAN_STRUCTURE = {
    0.01: 0.0671979,
    0.1: 2.67691,
    0.5: 30.6389,
    1.0: 80.8451,
    5.0: 490.255,
    25.0: 867.486,
}
VON_KARMAN_STRUCTURE_RTOL = 2e-6

# C. L0/r0 -> long-exposure FWHM over that of Kolmogorov's.
VON_KARMAN_FWHM_RATIO = {50.0: 0.6847, 100.0: 0.7661, 200.0: 0.8225, 500.0: 0.8744, 1000.0: 0.9023}
VON_KARMAN_FWHM_RATIO_ATOL = 1e-4

# P. Tokovinin 2002: sqrt(1 - 2.183 (r0/L0)^0.356) meets these within this share.
TOKOVININ_RTOL = 0.015

# P. Noll 1976 (0.023); C for the digits: the phase power spectrum is this times
# r0^(-5/3) (f^2 + 1/L0^2)^(-11/6).
PHASE_SPECTRUM_FACTOR = 0.0228956

# M. Conan 2000: for r << L0 the von Karman structure function over Kolmogorov's is
# 1 - 1.485 (r/L0)^(1/3) + 5.383 (r/L0)^2 - 6.281 (r/L0)^(7/3).
VON_KARMAN_SMALL_R = (1.485, 5.383, 6.281)

# P. Fried 1966 (3.8); C. Fried's tilt-removed average: greatest resolution over that of an infinite
# aperture's long exposure, and the D/r0 at which it is reached.
TILT_REMOVED_NEAR = (3.50, 3.75)
TILT_REMOVED_FAR = (1.25, 6.3)
TILT_REMOVED_ATOL = (0.005, 0.05)
# C. Near field, over the long exposure of the same aperture. A Gauss-Legendre quadrature of the
# formula gives 4.2247 at 3.389, so that the second digit after the point is uncertain by one.
TILT_REMOVED_NEAR_SAME_APERTURE = (4.23, 3.40)
TILT_REMOVED_NEAR_SAME_APERTURE_ATOL = (0.01, 0.05)

# P. Kasten & Young 1989; Pickering 2002: zenith distance (deg) -> airmass.
AIRMASS_KASTEN_YOUNG = {60.0: 1.9943, 75.0: 3.8129, 85.0: 10.3058}
AIRMASS_PICKERING = {60.0: 1.9932, 75.0: 3.8082, 85.0: 10.3337}
AIRMASS_ATOL = 1e-4

# C, exact; P. Noll 1976 table IV prints 0.1 to 0.5 % less: number of Zernike terms taken out ->
# variance left over the aperture, in (D/r0)^(5/3) rad2.
NOLL_RESIDUALS = {1: 1.03242, 3: 0.13466, 6: 0.06501, 10: 0.04024, 21: 0.02083}

# C from the covariance of the modes (Fried 1978 fits 5.6 exp(-0.1557 (D/r0)^2), from memory, high
# by up to 1.6): D/r0 -> share of frames whose variance after removal of tilt is at most 1 rad2.
LUCKY_SHARES = {3.5: 0.519, 4.0: 0.325, 5.0: 0.0911}
