"""Free convection about cylinders: horizontal ones, and slender vertical ones as a correction to a plate.

Ra = g beta |T_s - T_air| l³/(nu alpha) with l the diameter of a horizontal cylinder, or the height of a
vertical one. Properties at the film temperature; beta = 1/T_film for an ideal gas [K⁻¹]. All groups [1].
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.nusselt import Nusselt, banded_power
from finback.models.validity import Range

Values = float | NDArray[np.float64]

DIAMETER = "diameter"
HEIGHT = "height"


def churchill_chu_cylinder(rayleigh: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a horizontal isothermal cylinder, laminar and turbulent.

    Nu_D = {0.60 + 0.387 Ra^(1/6)/[1 + (0.559/Pr)^(9/16)]^(8/27)}²

    Arguments: rayleigh Ra_D [1], 1e-6 to 1e12 (books quote the lower limit from 1e-6 to 1e-5); prandtl [1],
    any. Length: diameter. Film temperature.
    Source: S. W. Churchill, H. H. S. Chu, Int. J. Heat Mass Transfer 18 (1975) 1049-1053; Incropera, 6th ed.,
    eq. 9.34. Usual scatter 10 %.

    Examples:
    >>> round(churchill_chu_cylinder(1e4, 0.71).value, 4)
    4.3733

    """
    name = "Churchill and Chu, horizontal cylinder"
    spread = (1 + (0.559 / prandtl) ** (9 / 16)) ** (8 / 27)
    return Nusselt(
        name=name,
        value=(0.60 + 0.387 * rayleigh ** (1 / 6) / spread) ** 2,
        length=DIAMETER,
        scatter=0.10,
        flags=Range("Ra", 1e-6, 1e12).check(rayleigh, name),
    )


def churchill_chu_cylinder_laminar(rayleigh: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a horizontal isothermal cylinder in laminar flow.

    Nu_D = 0.36 + 0.518 Ra^(1/4)/[1 + (0.559/Pr)^(9/16)]^(4/9)

    Arguments: rayleigh Ra_D [1], 1e-6 to 1e9; prandtl [1], any. Length: diameter. Film temperature.
    Source: Churchill and Chu (1975), as above; Holman, Heat Transfer, 10th ed., eq. 7-36. Usual scatter 10 %.

    Examples:
    >>> round(churchill_chu_cylinder_laminar(1e4, 0.71).value, 4)
    4.2782

    """
    name = "Churchill and Chu, horizontal cylinder, laminar"
    spread = (1 + (0.559 / prandtl) ** (9 / 16)) ** (4 / 9)
    return Nusselt(
        name=name,
        value=0.36 + 0.518 * rayleigh**0.25 / spread,
        length=DIAMETER,
        scatter=0.10,
        flags=Range("Ra", 1e-6, 1e9).check(rayleigh, name),
    )


def morgan_cylinder(rayleigh: Values) -> Nusselt:
    """Return Nu of a horizontal cylinder by power laws in five bands.

    Nu_D = C Ra^n, with C and n: 0.675, 0.058 (1e-10 to 1e-2); 1.02, 0.148 (to 1e2); 0.85, 0.188 (to 1e4);
    0.48, 0.25 (to 1e7); 0.125, 0.333 (to 1e12).

    Argument: rayleigh Ra_D [1]. Length: diameter. Film temperature.
    Source: V. T. Morgan, Advances in Heat Transfer 11 (1975) 199-264; Incropera, 6th ed., Table 9.1. Usual
    scatter 12 %; the bands meet with steps of up to 1 %.

    Examples:
    >>> round(morgan_cylinder(1e3).value, 4)
    3.1147

    """
    name = "Morgan, horizontal cylinder"
    bands = (
        (1e-10, 1e-2, 0.675, 0.058),
        (1e-2, 1e2, 1.02, 0.148),
        (1e2, 1e4, 0.85, 0.188),
        (1e4, 1e7, 0.48, 0.25),
        (1e7, 1e12, 0.125, 0.333),
    )
    return Nusselt(
        name=name,
        value=banded_power(rayleigh, bands),
        length=DIAMETER,
        scatter=0.12,
        flags=Range("Ra", 1e-10, 1e12).check(rayleigh, name),
    )


def popiel_vertical_cylinder(
    plate: Nusselt, rayleigh: Values, prandtl: Values, slenderness: Values
) -> Nusselt:
    """Return Nu of a vertical cylinder from that of a plate of its height.

    Nu_L = Nu_plate (1 + B [sqrt(32) Gr^(-1/4) L/D]^C), B = 0.0571322 + 0.20305 Pr^(-0.43),
    C = 0.9165 - 0.0043 Pr^(1/2) + 0.01333 ln Pr + 0.0004809/Pr, Gr = Ra/Pr.

    Arguments: plate, Nu_L of a vertical plate at the same Ra and Pr; rayleigh Ra_L [1], above 0 to 1e9;
    prandtl [1], 0.01 to 100; slenderness L/D [1]. Length: height. Film temperature. Below
    L/D = Gr^(1/4)/35 the correction is small, and books leave it out.
    Source: C. O. Popiel, J. Wojtkowiak, K. Bober, Experimental Thermal and Fluid Science 32 (2007) 607-613,
    fitted to the laminar boundary-layer solution of Cebeci (1974), whose tables end at 5 for the term in
    brackets (recalled, not seen again). Usual scatter 15 %.

    Examples:
    A pin of 8 mm diameter and 120 mm height loses half as much again as a plate of its height:

    >>> plate = Nusselt("plate", 20.0, HEIGHT, 0.1)
    >>> round(float(popiel_vertical_cylinder(plate, 5e6, 0.71, 15.0).value), 1)
    29.2

    """
    name = f"Popiel, slender vertical cylinder, on {plate.name}"
    curvature = np.sqrt(32) * (rayleigh / prandtl) ** -0.25 * slenderness
    B = 0.0571322 + 0.20305 * prandtl**-0.43
    C = 0.9165 - 0.0043 * prandtl**0.5 + 0.01333 * np.log(prandtl) + 0.0004809 / prandtl
    flags = (
        Range("Ra", 0.0, 1e9, open_low=True).check(rayleigh, name)
        + Range("Pr", 0.01, 100.0).check(prandtl, name)
        + Range("sqrt(32) Gr^(-1/4) L/D", 0.0, 5.0).check(curvature, name)
    )
    return Nusselt(
        name=name,
        value=plate.value * (1 + B * curvature**C),
        length=HEIGHT,
        scatter=float(np.hypot(plate.scatter, 0.11)),
        flags=plate.flags + flags,
    )
