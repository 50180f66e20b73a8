"""Constants of nature that fins need, SI units. CODATA 2018; all are exact by definition or convention."""

GRAVITY = 9.80665
"""Standard acceleration of free fall [m/s²], by convention of the 3rd CGPM (1901)."""

GAS_CONSTANT = 8.31446261815324
"""Molar gas constant R [J/(mol K)]."""

STEFAN_BOLTZMANN = 5.670374419e-8
"""Stefan-Boltzmann constant sigma [W/(m² K⁴)], to the ten digits that CODATA prints."""

ZERO_CELSIUS = 273.15
"""0 °C on the absolute scale [K]."""

ATMOSPHERE = 101325.0
"""Standard atmosphere [Pa]."""
