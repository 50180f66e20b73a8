"""Air, dry or humid: the properties that convection needs, as functions of temperature and pressure.

Dry air is an ideal gas with the second virial coefficient B(T) as its only departure, v = R T/p + B. At one
atmosphere that is within 0.01 % of the full equation of state; the heat capacity and the expansion
coefficient follow from the same expression. Viscosity and conductivity are the published equations as they
stand, the terms for dense air included.

Humid air is an ideal mixture with the vapour as a mole fraction: the virial coefficient counts for the air's
share, the transport properties mix by Wilke's rule (viscosity) and by the same weights (conductivity).

Sources: B(T) and the ideal heat capacity, E. W. Lemmon, R. T Jacobsen, S. G. Penoncello, D. G. Friend,
J. Phys. Chem. Ref. Data 29 (2000) 331-385; viscosity and conductivity, E. W. Lemmon, R. T Jacobsen, Int. J.
Thermophys. 25 (2004) 21-69; molar mass, A. Picard et al., Metrologia 45 (2008) 149-155; mixing, C. R. Wilke,
J. Chem. Phys. 18 (1950) 517-519.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models import vapour
from finback.models.constants import ATMOSPHERE, GAS_CONSTANT
from finback.models.validity import Flag, Range

Values = float | NDArray[np.float64]

MOLAR_MASS = 0.02896546
"""Molar mass of dry air with 400 µmol/mol of carbon dioxide [kg/mol]."""

TEMPERATURES = Range("temperature", 200.0, 1000.0, "K")
"""Where the properties are right to 0.5 % at the pressures below."""

PRESSURES = Range("pressure", 1e2, 5e5, "Pa")
"""Below, the free path of the molecules is no longer small beside a fin; above, B alone is not enough."""

_REDUCING_TEMPERATURE, _REDUCING_DENSITY = 132.6312, 10447.7  # K, mol/m³
_VIRIAL = (  # N, power of tau: the terms of first order in density
    (0.118160747229, 0.0),
    (0.713116392079, 0.33),
    (-1.61824192067, 1.01),
    (-0.101365037912, 1.6),
    (-0.146629609713, 3.6),
    (0.0148287891978, 3.5),
)
_COLLISION = (0.431, -0.4623, 0.08406, 0.005341, -0.00331)
_DENSE_VISCOSITY = (  # N [µPa s], powers of tau and of density, 1 where exp(-density) multiplies
    (10.72, 0.2, 1, 0),
    (1.122, 0.05, 4, 0),
    (0.002019, 2.4, 9, 0),
    (-8.876, 0.6, 1, 1),
    (-0.02916, 3.6, 8, 1),
)
_DENSE_CONDUCTIVITY = (  # N [mW/(m K)], powers of tau and of density, 1 where exp(-density²) multiplies
    (8.743, 0.1, 1, 0),
    (14.76, 0.0, 2, 0),
    (-16.62, 0.5, 3, 1),
    (3.793, 2.7, 7, 1),
    (-6.142, 0.3, 7, 1),
    (-0.3778, 1.3, 11, 1),
)


@dataclass(frozen=True, slots=True)
class AirProperties:
    """Properties of air, floats or arrays that broadcast.

    Arguments: temperature [K]; pressure [Pa]; density rho [kg/m³]; specific_heat c_p [J/(kg K)]; viscosity mu
    [Pa s]; conductivity k [W/(m K)]; expansion beta [1/K], of volume at constant pressure; flags, the ranges
    that were left.
    """

    temperature: Values
    pressure: Values
    density: Values
    specific_heat: Values
    viscosity: Values
    conductivity: Values
    expansion: Values
    flags: tuple[Flag, ...] = ()

    @property
    def kinematic_viscosity(self) -> Values:
        """Kinematic viscosity nu = mu/rho [m²/s]."""
        return self.viscosity / self.density

    @property
    def diffusivity(self) -> Values:
        """Thermal diffusivity alpha = k/(rho c_p) [m²/s]."""
        return self.conductivity / (self.density * self.specific_heat)

    @property
    def prandtl(self) -> Values:
        """Prandtl number Pr = nu/alpha [1]."""
        return self.viscosity * self.specific_heat / self.conductivity


def film_temperature(surface: Values, air: Values) -> Values:
    """Return the film temperature [K], the mean of surface [K] and air [K]."""
    return (surface + air) / 2


def air(temperature: Values, pressure: Values = ATMOSPHERE, vapour_fraction: Values = 0.0) -> AirProperties:
    """Return the properties of air.

    Arguments: temperature [K]; pressure [Pa]; vapour_fraction, moles of water vapour in a mole of humid air
    [1], from `vapour.vapour_fraction`; 0 is dry. Floats or arrays that broadcast.

    Outside 200 to 1000 K or 100 Pa to 5 bar, and where water would condense, the values carry a flag. Raises
    ValueError for a temperature or pressure that is not positive and finite and for a fraction outside 0 to
    1.

    Examples:
    Dry air at 300 K and one atmosphere; the full equation of state gives 1.177 kg/m³ and 0.7071:

    >>> room = air(300.0)
    >>> round(float(room.density), 3), round(float(room.prandtl), 4)
    (1.177, 0.7071)
    >>> [str(flag) for flag in air(1200.0).flags]
    ["The air's property formula is stated for temperature from 200 to 1000 K; here it is 1200 K."]

    """
    _require_state(temperature, pressure, vapour_fraction)
    owner = "The air's property formula"
    flags = TEMPERATURES.check(temperature, owner) + PRESSURES.check(pressure, owner)
    flags += _condensation(temperature, pressure, vapour_fraction)

    dry = 1.0 - vapour_fraction
    mass = dry * MOLAR_MASS + vapour_fraction * vapour.MOLAR_MASS
    B, slope, curvature = _second_virial(temperature)
    volume = GAS_CONSTANT * temperature / pressure + dry * B
    growth = GAS_CONSTANT / pressure + dry * slope
    heat = dry * (_ideal_heat(temperature) - temperature * pressure * curvature)
    mu, k = _transport(temperature, 1.0 / volume)
    if np.any(vapour_fraction):
        heat = heat + vapour_fraction * vapour.molar_heat(temperature)
        mu, k = _mixed(temperature, vapour_fraction, mu, k)
    return AirProperties(
        temperature=temperature,
        pressure=pressure,
        density=mass / volume,
        specific_heat=heat / mass,
        viscosity=mu,
        conductivity=k,
        expansion=growth / volume,
        flags=flags,
    )


def _require_state(temperature: Values, pressure: Values, vapour_fraction: Values) -> None:
    for name, value, unit in (("temperature", temperature, "K"), ("pressure", pressure, "Pa")):
        given = np.asarray(value, dtype=np.float64)
        if not bool(np.all((given > 0) & np.isfinite(given))):
            raise ValueError(f"the {name} of air must be positive and finite, not {value} {unit}")
    fraction = np.asarray(vapour_fraction, dtype=np.float64)
    if not bool(np.all((fraction >= 0) & (fraction <= 1))):
        raise ValueError(f"the vapour's mole fraction must lie between 0 and 1, not {vapour_fraction}")


def _condensation(temperature: Values, pressure: Values, vapour_fraction: Values) -> tuple[Flag, ...]:
    if not np.any(vapour_fraction):
        return ()
    humidity = np.max(vapour_fraction * pressure / vapour.saturation_pressure(temperature))
    if humidity <= 1:
        return ()
    message = (
        f"The air holds {humidity:.3g} times the vapour that it can at its temperature: water condenses."
    )
    return (Flag("humidity", message),)


def _second_virial(temperature: Values) -> tuple[Values, Values, Values]:
    """Return B [m³/mol] and its first two derivatives in temperature."""
    tau = _REDUCING_TEMPERATURE / temperature
    terms = [(n * tau**power / _REDUCING_DENSITY, power) for n, power in _VIRIAL]
    value = sum(term for term, _ in terms)
    slope = sum(-power * term for term, power in terms) / temperature
    curvature = sum(power * (power + 1) * term for term, power in terms) / temperature**2
    return value, slope, curvature


def _ideal_heat(temperature: Values) -> Values:
    """Return the molar isobaric heat capacity of dry air at zero density [J/(mol K)]."""
    T = temperature
    smooth: Values = 3.490888032 + 2.395525583e-6 * T + 7.172111248e-9 * T**2 - 3.115413101e-13 * T**3
    smooth = smooth + 0.223806688 / T**1.5
    u, v, w = 3364.011 / T, 2242.45 / T, 11580.4 / T
    vibration: Values = 0.791309509 * u**2 * np.exp(u) / np.expm1(u) ** 2
    vibration = vibration + 0.212236768 * v**2 * np.exp(v) / np.expm1(v) ** 2
    electronic: Values = 2 / 3 * 0.197938904 * w**2 * np.exp(-w) / (1 + 2 / 3 * np.exp(-w)) ** 2
    return GAS_CONSTANT * (smooth + vibration + electronic)


def _transport(temperature: Values, molar_density: Values) -> tuple[Values, Values]:
    """Return viscosity [Pa s] and conductivity [W/(m K)] of dry air; density [mol/m³]."""
    tau, delta = _REDUCING_TEMPERATURE / temperature, molar_density / _REDUCING_DENSITY
    log_reduced = np.log(temperature / 103.3)
    collision = np.exp(sum(b * log_reduced**power for power, b in enumerate(_COLLISION)))
    thin = 0.0266958 * np.sqrt(28.9586 * temperature) / (0.360**2 * collision)  # µPa s
    mu = thin + sum(
        n * tau**t * delta**d * (np.exp(-delta) if damped else 1.0) for n, t, d, damped in _DENSE_VISCOSITY
    )
    k = 1.308 * thin + 1.405 * tau**-1.1 - 1.036 * tau**-0.3  # mW/(m K)
    k = k + sum(
        n * tau**t * delta**d * (np.exp(-(delta**2)) if damped else 1.0)
        for n, t, d, damped in _DENSE_CONDUCTIVITY
    )
    return 1e-6 * mu, 1e-3 * k


def _mixed(temperature: Values, fraction: Values, mu: Values, k: Values) -> tuple[Values, Values]:
    """Return viscosity [Pa s] and conductivity [W/(m K)] of air with a mole fraction of vapour [1]."""
    wet_mu, wet_k = vapour.viscosity(temperature), vapour.conductivity(temperature)
    mass_ratio, dry = MOLAR_MASS / vapour.MOLAR_MASS, 1.0 - fraction

    def weight(viscosity_ratio: Values, ratio: float) -> Values:
        share: Values = (1 + np.sqrt(viscosity_ratio) * ratio**-0.25) ** 2 / np.sqrt(8 * (1 + ratio))
        return share

    around_air = dry + fraction * weight(mu / wet_mu, mass_ratio)
    around_vapour = fraction + dry * weight(wet_mu / mu, 1 / mass_ratio)
    return (
        dry * mu / around_air + fraction * wet_mu / around_vapour,
        dry * k / around_air + fraction * wet_k / around_vapour,
    )
