"""Physical constants and reference states, SI.

R is exact since the 2019 revision of the SI (CODATA 2022). The reference
states of normal, standard and standard-cubic-foot gas volumes are those of
ISO 13443:1996 (standard), DIN 1343:1990 (normal) and the 60 degF, 14.696 psia
of the trade in North America (common practice).
"""

GAS_CONSTANT = 8.31446261815324
"""J/(mol K)"""

NORMAL_TEMPERATURE = 273.15
"""K"""

STANDARD_TEMPERATURE = 288.15
"""K"""

STANDARD_ATMOSPHERE = 101325.0
"""Pa"""

SCF_TEMPERATURE = (60.0 + 459.67) / 1.8
"""K, 60 degF"""

SCF_PRESSURE = 14.696 * 6894.757293168361
"""Pa, 14.696 psia"""

CUBIC_FOOT = 0.3048**3
"""m3"""

NORMAL_MOLAR_VOLUME = GAS_CONSTANT * NORMAL_TEMPERATURE / STANDARD_ATMOSPHERE
"""m3/mol, ideal gas at 273.15 K and 101.325 kPa"""

STANDARD_MOLAR_VOLUME = GAS_CONSTANT * STANDARD_TEMPERATURE / STANDARD_ATMOSPHERE
"""m3/mol, ideal gas at 288.15 K and 101.325 kPa"""

SCF_AMOUNT = SCF_PRESSURE * CUBIC_FOOT / (GAS_CONSTANT * SCF_TEMPERATURE)
"""mol in one standard cubic foot"""
