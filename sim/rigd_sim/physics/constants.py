"""Constants: exact ones from the SI (BIPM, SI Brochure, 9th ed. 2019), the standard atmosphere from CGPM 1954."""

GAS_CONSTANT_J_MOL_K = 8.31446261815324
ATMOSPHERE_PA = 101_325.0
ZERO_CELSIUS_K = 273.15
BAR_PA = 1e5
ML_M3 = 1e-6
ML_MIN_M3_S = 1e-6 / 60
GRAVITY_M_S2 = 9.80665
