"""Published figures of photometry.

Marks: P published; M published, given from memory; C computed from a published table.
"""

# P. Bessell, Castelli & Plez 1998, table A2 (M for J, H, K): flux density (Jy) of magnitude 0.
ZERO_FLUXES_JY = {
    "U": 1790.0,
    "B": 4063.0,
    "V": 3636.0,
    "R": 3064.0,
    "I": 2416.0,
    "J": 1589.0,
    "H": 1021.0,
    "K": 640.0,
}

# P. Oke & Gunn 1983.
AB_ZERO_FLUX_JY = 3631.0

# P. Bessell 1979, worked example: V = 23.90 with 3640 Jy and width/wavelength 0.16 gives 2.42
# photons / s / m2. The tolerance is half a unit of the last digit plus the 0.2 % by which the
# integral of d(lambda)/lambda over the box exceeds that ratio.
BESSELL_V_MAGNITUDE = 23.90
BESSELL_V_FLUX_JY = 3640.0
BESSELL_V_WIDTH_RATIO = 0.16
BESSELL_V_PHOTONS = 2.42
BESSELL_V_PHOTONS_RTOL = 0.0045

# M. Bessell 1979 (U to I) and Bessell 2005 (J, H, K): effective wavelengths (nm) that the trade
# quotes. They depend on the star, and the pivot wavelength lies up to 3 % off.
EFFECTIVE_WAVELENGTHS_NM = {
    "U": 360.0,
    "B": 440.0,
    "V": 550.0,
    "R": 640.0,
    "I": 790.0,
    "J": 1220.0,
    "H": 1630.0,
    "K": 2190.0,
}
EFFECTIVE_WAVELENGTHS_RTOL = 0.03

# Photon rates through the pass-bands that the package speclite tabulates (Bessell 1990), by band:
# tolerance of the box that stands for each.
SPECLITE_RTOL = {"V": 0.01, "R": 0.03, "I": 0.03, "B": 0.06, "U": 0.06}

# M. Fukugita et al. 1996, table 2a: effective wavelengths (nm) of the primed bands, which lie some
# per cent redward of those of the survey camera (Doi et al. 2010).
FUKUGITA_EFFECTIVE_NM = {"u": 355.7, "g": 482.5, "r": 626.1, "i": 767.2, "z": 909.7}
FUKUGITA_RTOL = 0.035

# P. A flux density of 1 Jy is 1.51e7 photons / s / m2 for each unit of d(lambda)/lambda: the
# jansky over Planck's constant, by hand. Half a unit of the last digit.
PHOTONS_PER_JANSKY = 1.51e7
PHOTONS_PER_JANSKY_RTOL = 0.0034

# T. A blackbody's peak in f_lambda: wavelength times temperature, m K (Wien 1893).
WIEN = 2.897772e-3
WIEN_RTOL = 1e-6
