"""Published figures of orbits, each with its source and tolerance."""

# P. Meeus, Astronomical Algorithms, 2nd ed., example 57.a, a visual binary. Years, degrees,
# arcsec; the place at 1980.0 as printed, and in full.
MEEUS_57 = {
    "period": 41.623,
    "periastron": 1934.008,
    "eccentricity": 0.2763,
    "semi_major_axis_arcsec": 0.907,
    "inclination_deg": 59.025,
    "node_deg": 23.717,
    "argument_deg": 219.907,
}
MEEUS_57_YEAR = 1980.0
MEEUS_57_PRINTED = (318.4, 0.411)
MEEUS_57_PRINTED_ATOL = (0.05, 0.0005)
MEEUS_57_FULL = (318.42426, 0.4110178)
MEEUS_57_FULL_ATOL = (1e-5, 1e-7)

# P. Meeus, ch. 30, example 30.a: e = 0.1, M = 5 degrees -> E in degrees.
MEEUS_30 = (0.1, 5.0, 5.554589)
MEEUS_30_ATOL = 1e-6
