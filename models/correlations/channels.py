"""Channels between parallel fins: air that rises between them, and air that is blown through.

Both give a coefficient on T_s - T_inlet, over all the wall that the air passes. b is the gap between the
faces [m], L the length of the channel along the flow [m]. Properties at the mean of surface and inlet
temperature. All groups [1]; each law raises ValueError where the group that drives it is not positive: its
channel has no flow.
"""

from enum import Enum

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.nusselt import Nusselt
from finback.models.validity import Range

Values = float | NDArray[np.float64]

GAP = "gap between the fins"


class Walls(Enum):
    """How the two walls of a channel are heated: constants of its narrow and its wide limit."""

    ISOTHERMAL = (576.0, 2.873, 2.0, 0.5)
    ISOTHERMAL_AND_ADIABATIC = (144.0, 2.873, 2.0, 0.5)
    ISOFLUX = (48.0, 2.51, 1.0, 0.4)
    ISOFLUX_AND_ADIABATIC = (24.0, 2.51, 1.0, 0.4)


def elenbaas(channel_rayleigh: Values) -> Nusselt:
    """Return Nu of air rising between two vertical isothermal plates.

    Nu_b = (1/24) Ra* [1 - exp(-35/Ra*)]^(3/4), Ra* = Ra_b b/L = g beta (T_s - T_air) b⁴/(nu alpha L)

    Argument: channel_rayleigh Ra* [1], 0.1 to 1e5. Length: gap b.
    Source: W. Elenbaas, Physica 9 (1942) 1-28; Incropera, 6th ed., eq. 9.37. Limits: Ra*/24 fully developed,
    0.60 Ra*^(1/4) for plates far apart. Usual scatter 10 %.

    Examples:
    >>> round(elenbaas(54.3).value, 4)
    1.2947

    """
    name = "Elenbaas, channel between vertical plates"
    _require_flow("Ra*", channel_rayleigh)
    # 1 - exp(-y) by expm1: at a large Ra* the plain difference would lose the digits that count.
    filled = -np.expm1(-35 / channel_rayleigh)
    return Nusselt(
        name=name,
        value=channel_rayleigh / 24 * filled**0.75,
        length=GAP,
        scatter=0.10,
        flags=Range("Ra*", 0.1, 1e5).check(channel_rayleigh, name),
    )


def bar_cohen_rohsenow(channel_rayleigh: Values, walls: Walls = Walls.ISOTHERMAL) -> Nusselt:
    """Return Nu of air rising between two vertical plates, from narrow gaps to wide ones.

    Isothermal: Nu_b = [C1/Ra*² + C2/Ra*^(1/2)]^(-1/2), with C1, C2 = 576, 2.873 for both walls warm, 144,
    2.873 for one warm and one adiabatic. Uniform flux: the local Nu_b at the end of the channel,
    [C1/Ra*_q + C2/Ra*_q^(2/5)]^(-1/2), with 48, 2.51 and 24, 2.51.

    Arguments: channel_rayleigh, Ra* = Ra_b b/L [1], or for uniform flux q'' [W/m²] Ra*_q = g beta q'' b⁵/(k
    nu alpha L); walls. Length: gap b.
    Source: A. Bar-Cohen, W. M. Rohsenow, J. Heat Transfer 106 (1984) 116-123; Incropera, 6th ed., eq. 9.45
    and Table 9.3, which print 2.87. A composite of both limits, without a range of its own. Usual scatter 10
    %.

    Examples:
    Fins that lose most from a given volume have Ra* = 54.3:

    >>> round(bar_cohen_rohsenow(54.3).value, 3)
    1.307

    """
    name = "Bar-Cohen and Rohsenow, channel between vertical plates"
    _require_flow("Ra*", channel_rayleigh)
    narrow, wide, narrow_power, wide_power = walls.value
    total = narrow / channel_rayleigh**narrow_power + wide / channel_rayleigh**wide_power
    return Nusselt(
        name=name,
        value=total**-0.5,
        length=GAP,
        scatter=0.10,
    )


def teertstra(channel_reynolds: Values, prandtl: Values) -> Nusselt:
    """Return Nu of laminar air blown between parallel fins, from short channels to long ones.

    Nu_b = {(Re* Pr/2)⁻³ + [0.664 Re*^(1/2) Pr^(1/3) (1 + 3.65/Re*^(1/2))^(1/2)]⁻³}^(-1/3)

    Arguments: channel_reynolds Re* = U b²/(nu L) [1], 0.1 to 100 (tested 0.26 to 175), with the velocity U
    between the fins [m/s]; prandtl [1]. Length: gap b. The coefficient is on T_s - T_inlet for walls at one
    temperature; a fin's efficiency comes on top.
    Source: P. Teertstra, M. M. Yovanovich, J. R. Culham, J. Electronics Manufacturing 10 (2000) 253-261.
    Usual scatter 10 %.

    Examples:
    >>> round(teertstra(10.0, 0.71).value, 4)
    2.421

    """
    name = "Teertstra, Yovanovich and Culham, channel between fins"
    _require_flow("Re*", channel_reynolds)
    root = channel_reynolds**0.5
    filled = channel_reynolds * prandtl / 2
    entering = 0.664 * root * prandtl ** (1 / 3) * (1 + 3.65 / root) ** 0.5
    return Nusselt(
        name=name,
        value=(filled**-3.0 + entering**-3.0) ** (-1 / 3),
        length=GAP,
        scatter=0.10,
        flags=Range("Re*", 0.1, 100.0).check(channel_reynolds, name),
    )


def _require_flow(group: str, value: Values) -> None:
    if not bool(np.all(np.asarray(value) > 0)):
        raise ValueError(f"nothing drives air through the channel: {group} must be positive, not {value}")
