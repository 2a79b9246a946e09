"""Outside values for the shapes of sources, each with its source and tolerance."""

# P. Ciotti & Bertin 1999, A&A 352, 447: b of Sersic's law, Gamma(2n) = 2 gamma(2n, b); digits by
# scipy.special.gammaincinv(2n, 0.5). Tolerance: one unit of the last digit.
SERSIC_B = {0.5: 0.693147, 1.0: 1.678347, 2.0: 3.672061, 4.0: 7.669249, 10.0: 19.667672}
SERSIC_B_ATOL = 1e-6

# M (from memory). Ciotti & Bertin 1999, equation 18: coefficients of n, 1, 1/n, 1/n^2 in
# b = 2n - 1/3 + 4/(405 n) + 46/(25515 n^2) + O(1e-4/n^3).
SERSIC_B_SERIES = (2.0, -1.0 / 3.0, 4.0 / 405.0, 46.0 / 25515.0)

# P. Airy 1835; first zero of J1 over pi: the transform of an even disc of unit diameter vanishes.
DISC_FIRST_ZERO = 1.21967
DISC_FIRST_ZERO_ATOL = 1e-5

# M (from memory). Hanbury Brown et al. 1974, MNRAS 167, 475: a disc dark at the limb (linear
# coefficient 1) has its first zero where tan z = z, z = 4.493409, over pi in cycles a diameter.
DARK_LIMB_FIRST_ZERO = 4.493409 / 3.14159265358979
DARK_LIMB_FIRST_ZERO_ATOL = 1e-6

# P. Meeus, Astronomical Algorithms, ch. 41: lit fraction (1 + cos i)/2. Phase angle in degrees.
LIT_FRACTION = {0.0: 1.0, 60.0: 0.75, 90.0: 0.5, 120.0: 0.25}

# P. Euclidean geometry: the centroid of a half disc of unit radius lies 4/(3 pi) from its diameter.
HALF_DISC_CENTROID = 0.42441318
