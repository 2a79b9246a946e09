"""Published and computed figures of wavefronts.

Marks: P published; C computed by direct quadrature or root finding from the published formula, two
independent ways; M published, given from memory; T common practice of the trade, no source. Each
value carries the tolerance at which it is to be met: one unit of its last digit printed, unless
said.
"""

# P. Noll 1976, table I: index -> radial order n, azimuthal order m (negative: sine).
NOLL_ORDER = {
    1: (0, 0),
    2: (1, 1),
    3: (1, -1),
    4: (2, 0),
    5: (2, -2),
    6: (2, 2),
    7: (3, -1),
    8: (3, 1),
    9: (3, -3),
    10: (3, 3),
    11: (4, 0),
    12: (4, 2),
    13: (4, -2),
    14: (4, 4),
    15: (4, -4),
    16: (5, 1),
    17: (5, -1),
    18: (5, 3),
    19: (5, -3),
    20: (5, 5),
    21: (5, -5),
    22: (6, 0),
}

# C. Noll's residuals with every digit of the constants, (D/r0)^(5/3) rad2, after J terms.
NOLL_RESIDUAL = {
    1: 1.03242,
    2: 0.58354,
    3: 0.13466,
    4: 0.11145,
    5: 0.08823,
    6: 0.06501,
    7: 0.05882,
    8: 0.05263,
    9: 0.04644,
    10: 0.04024,
    21: 0.02083,
}
NOLL_RESIDUAL_ATOL = 1e-5

# P. Noll 1976, table IV (M for J = 11 to 20). His rounded constants make them 0.1 to 0.5 % lower
# than the exact ones; from J = 11 on the third digit's rounding adds up to 0.2 %.
NOLL_RESIDUAL_PRINTED = {
    1: 1.0299,
    2: 0.582,
    3: 0.134,
    4: 0.111,
    5: 0.0880,
    6: 0.0648,
    7: 0.0587,
    8: 0.0525,
    9: 0.0463,
    10: 0.0401,
    11: 0.0377,
    12: 0.0352,
    13: 0.0328,
    14: 0.0304,
    15: 0.0279,
    16: 0.0267,
    17: 0.0255,
    18: 0.0243,
    19: 0.0232,
    20: 0.0220,
    21: 0.0208,
}
NOLL_RESIDUAL_PRINTED_RTOL = 0.006

# P. Born & Wolf, Principles of Optics, ch. 9 (sinc squared): defocus at the edge of a clear
# aperture, in waves -> intensity on the axis over that in focus.
DEFOCUS_AXIAL_INTENSITY = {0.125: 0.94964, 0.25: 0.81057, 0.5: 0.40528}
DEFOCUS_AXIAL_INTENSITY_ATOL = 1e-5
