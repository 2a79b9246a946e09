"""Published figures of the air's refraction.

Marks: P published; M published, given from memory.
"""

# P. Ciddor 1996; package ref-index: n - 1 of dry air, 15 C, 101325 Pa, 500 nm, 450 ppm of CO2.
CIDDOR_500NM = 2.78974e-4
CIDDOR_500NM_ATOL = 1e-9

# M. Ciddor 1996, table 1: (C, Pa) -> (n - 1) 1e8 of dry air with 450 ppm of CO2 at 633 nm.
CIDDOR_DRY_633NM = {
    (20.0, 80e3): 21458.0,
    (20.0, 100e3): 26824.4,
    (20.0, 120e3): 32191.6,
    (10.0, 100e3): 27774.7,
    (30.0, 100e3): 25937.2,
}
CIDDOR_DRY_633NM_ATOL = 0.5

# P. Filippenko 1982, table I: differential refraction (arcsec) against 500 nm at 600 mmHg, 7 C,
# 8 mmHg of vapour. (sec z, wavelength in nm) -> arcsec, printed to 0.01.
FILIPPENKO_MMHG = (600.0, 8.0)
FILIPPENKO_CELSIUS = 7.0
FILIPPENKO = {
    (1.5, 300.0): 2.37,
    (1.5, 400.0): 0.71,
    (1.5, 600.0): -0.37,
    (1.5, 700.0): -0.60,
    (1.5, 800.0): -0.74,
    (1.5, 1000.0): -0.91,
    (1.2, 400.0): 0.42,
    (1.1, 400.0): 0.29,
    (1.3, 350.0): 1.00,
}
FILIPPENKO_ATOL = 0.005
