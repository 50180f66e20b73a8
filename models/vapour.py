"""Water vapour, the part of humid air that is not air: saturation, heat capacity, viscosity, conductivity.

The vapour in room air is so thin that its own molecules hardly meet: the zero-density terms of the standards
for steam describe it.

Sources: saturation pressure, J. Huang, J. Appl. Meteor. Climatol. 57 (2018) 1265-1272, over water and over
ice; heat capacity, W. Wagner, A. Pruß, J. Phys. Chem. Ref. Data 31 (2002) 387-535, table 6.1; viscosity,
M. L. Huber et al., J. Phys. Chem. Ref. Data 38 (2009) 101-125, eq. 11; conductivity, M. L. Huber et al.,
J. Phys. Chem. Ref. Data 41 (2012) 033102, eq. 16.
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.constants import ATMOSPHERE, GAS_CONSTANT, ZERO_CELSIUS

Values = float | NDArray[np.float64]

MOLAR_MASS = 0.018015268
"""Molar mass of water [kg/mol]."""

_CRITICAL = 647.096  # K
_EINSTEIN = (
    (0.012436, 1.28728967),
    (0.97315, 3.53734222),
    (1.27950, 7.74073708),
    (0.96956, 9.24437796),
    (0.24873, 27.5075105),
)
_VISCOSITY = (1.67752, 2.20462, 0.6366564, -0.241605)
_CONDUCTIVITY = (2.443221e-3, 1.323095e-2, 6.770357e-3, -3.454586e-3, 4.096266e-4)


def saturation_pressure(temperature: Values) -> Values:
    """Return the pressure [Pa] of saturated vapour over water, and below 0 °C over ice.

    Argument: temperature [K], from -100 °C to 100 °C; within 0.05 % there, and of use to 200 °C.

    Examples:
    At 20 °C the steam tables print 2.339 kPa:

    >>> round(float(saturation_pressure(293.15)))
    2339

    """
    t = np.asarray(temperature, dtype=np.float64) - ZERO_CELSIUS
    wet, frozen = np.maximum(t, 0.0), np.minimum(t, 0.0)
    over_water = np.exp(34.494 - 4924.99 / (wet + 237.1)) / (wet + 105) ** 1.57
    over_ice = np.exp(43.494 - 6545.8 / (frozen + 278)) / (frozen + 868) ** 2
    return np.where(t > 0, over_water, over_ice)[()]


def vapour_fraction(relative_humidity: Values, temperature: Values, pressure: Values = ATMOSPHERE) -> Values:
    """Return the mole fraction of vapour [1] in air of a relative humidity.

    Arguments: relative_humidity [1], from 0 to 1, at temperature [K]; pressure [Pa]. The fraction stays when
    the air warms at a surface; the relative humidity does not. Raises ValueError for a humidity outside 0 to
    1, and where the saturation pressure exceeds the pressure.

    Examples:
    >>> round(float(vapour_fraction(0.5, 298.15)), 4)
    0.0156

    """
    humidity = np.asarray(relative_humidity, dtype=np.float64)
    if not bool(np.all((humidity >= 0) & (humidity <= 1))):
        raise ValueError(f"relative humidity must lie between 0 and 1, not {relative_humidity}")
    fraction = np.asarray(humidity * saturation_pressure(temperature) / pressure)
    if not bool(np.all(fraction <= 1)):
        raise ValueError(
            "the vapour pressure cannot exceed the pressure of the air; state the humidity at a lower "
            "temperature"
        )
    return fraction[()]


def molar_heat(temperature: Values) -> Values:
    """Return the molar isobaric heat capacity [J/(mol K)] of thin vapour at a temperature [K]."""
    tau = _CRITICAL / temperature
    total: Values = 4.00632 + sum(
        share * (rate * tau) ** 2 * np.exp(-rate * tau) / np.expm1(-rate * tau) ** 2
        for share, rate in _EINSTEIN
    )
    return GAS_CONSTANT * total


def viscosity(temperature: Values) -> Values:
    """Return the viscosity [Pa s] of thin vapour at a temperature [K]."""
    reduced = temperature / _CRITICAL
    mu: Values = 1e-4 * np.sqrt(reduced) / sum(n / reduced**power for power, n in enumerate(_VISCOSITY))
    return mu


def conductivity(temperature: Values) -> Values:
    """Return the conductivity [W/(m K)] of thin vapour at a temperature [K]."""
    reduced = temperature / _CRITICAL
    k: Values = 1e-3 * np.sqrt(reduced) / sum(n / reduced**power for power, n in enumerate(_CONDUCTIVITY))
    return k
