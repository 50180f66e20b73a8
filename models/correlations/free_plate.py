"""Free convection on plates: vertical, and horizontal with the hot side up or down.

Ra = g beta |T_s - T_air| L³/(nu alpha) with L the height of a vertical plate, or area over perimeter of a
horizontal one. Properties at the film temperature; beta = 1/T_film for an ideal gas [K⁻¹]. All groups [1].
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.nusselt import Nusselt, banded_power
from finback.models.validity import Range

Values = float | NDArray[np.float64]

HEIGHT = "height"
AREA_OVER_PERIMETER = "area over perimeter"


def churchill_chu_vertical_all(rayleigh: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a vertical isothermal plate, laminar and turbulent.

    Nu_L = {0.825 + 0.387 Ra^(1/6)/[1 + (0.492/Pr)^(9/16)]^(8/27)}²

    Arguments: rayleigh Ra_L [1], 0.1 to 1e12; prandtl [1], any. Length: height. Film temperature.
    Source: S. W. Churchill, H. H. S. Chu, Int. J. Heat Mass Transfer 18 (1975) 1323-1329; Incropera, 6th ed.,
    eq. 9.26. Usual scatter 10 %.

    Examples:
    >>> round(churchill_chu_vertical_all(1e9, 0.71).value, 3)
    122.857

    """
    name = "Churchill and Chu, vertical plate"
    spread = (1 + (0.492 / prandtl) ** (9 / 16)) ** (8 / 27)
    return Nusselt(
        name=name,
        value=(0.825 + 0.387 * rayleigh ** (1 / 6) / spread) ** 2,
        length=HEIGHT,
        scatter=0.10,
        flags=Range("Ra", 0.1, 1e12).check(rayleigh, name),
    )


def churchill_chu_vertical_laminar(rayleigh: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a vertical isothermal plate in laminar flow, there a little better than the other form.

    Nu_L = 0.68 + 0.670 Ra^(1/4)/[1 + (0.492/Pr)^(9/16)]^(4/9)

    Arguments: rayleigh Ra_L [1], above 0 to 1e9; prandtl [1], any. Length: height. Film temperature.
    Source: Churchill and Chu (1975), as above; Incropera, 6th ed., eq. 9.27. Usual scatter 10 %.

    Examples:
    >>> round(churchill_chu_vertical_laminar(1e8, 0.71).value, 3)
    52.105

    """
    name = "Churchill and Chu, vertical plate, laminar"
    spread = (1 + (0.492 / prandtl) ** (9 / 16)) ** (4 / 9)
    return Nusselt(
        name=name,
        value=0.68 + 0.670 * rayleigh**0.25 / spread,
        length=HEIGHT,
        scatter=0.10,
        flags=Range("Ra", 0.0, 1e9, open_low=True).check(rayleigh, name),
    )


def mcadams_vertical(rayleigh: Values) -> Nusselt:
    """Return Nu of a vertical plate by the two power laws.

    Nu_L = 0.59 Ra^(1/4) for 1e4 to 1e9, 0.10 Ra^(1/3) for 1e9 to 1e13, with a step of -5 % at 1e9.

    Argument: rayleigh Ra_L [1]. Length: height. Film temperature. Made for gases; Pr near 0.7 is implied.
    Source: W. H. McAdams, Heat Transmission, 3rd ed. (1954); C. Y. Warner, V. S. Arpaci, Int. J. Heat Mass
    Transfer 11 (1968) 397-406; Incropera, 6th ed., eq. 9.24. Usual scatter 12 %.

    Examples:
    >>> round(mcadams_vertical(1e7).value, 3)
    33.178

    """
    name = "McAdams, vertical plate"
    return Nusselt(
        name=name,
        value=banded_power(rayleigh, ((1e4, 1e9, 0.59, 1 / 4), (1e9, 1e13, 0.10, 1 / 3))),
        length=HEIGHT,
        scatter=0.12,
        flags=Range("Ra", 1e4, 1e13).check(rayleigh, name),
    )


def horizontal_plate_up(rayleigh: Values) -> Nusselt:
    """Return Nu of a horizontal plate, hot side up or cold side down.

    Nu_L = 0.54 Ra^(1/4) for 1e4 to 1e7, 0.15 Ra^(1/3) for 1e7 to 1e11

    Argument: rayleigh Ra [1] with L = area over perimeter. Film temperature; Pr from 0.7 up.
    Source: McAdams (1954); J. R. Lloyd, W. R. Moran, J. Heat Transfer 96 (1974) 443-447; length after R. J.
    Goldstein, E. M. Sparrow, D. C. Jones, Int. J. Heat Mass Transfer 16 (1973) 1025; Incropera, 6th ed.,
    eqs. 9.30 and 9.31. Usual scatter 15 %.

    Examples:
    >>> round(horizontal_plate_up(1e6).value, 3)
    17.076

    """
    name = "McAdams, horizontal plate, hot side up"
    return Nusselt(
        name=name,
        value=banded_power(rayleigh, ((1e4, 1e7, 0.54, 1 / 4), (1e7, 1e11, 0.15, 1 / 3))),
        length=AREA_OVER_PERIMETER,
        scatter=0.15,
        flags=Range("Ra", 1e4, 1e11).check(rayleigh, name),
    )


def horizontal_plate_down(rayleigh: Values) -> Nusselt:
    """Return Nu of a horizontal plate, hot side down or cold side up.

    Nu_L = 0.27 Ra^(1/4) for 1e5 to 1e10

    Argument: rayleigh Ra [1] with L = area over perimeter. Film temperature.
    Source: McAdams (1954); Incropera, 6th ed., eq. 9.32. From its 7th edition on the book prints the law of
    Radziemska and Lewandowski instead. Usual scatter 20 %: the two laws lie 14 % apart at Ra = 1e7.

    Examples:
    >>> round(horizontal_plate_down(1e7).value, 3)
    15.183

    """
    name = "McAdams, horizontal plate, hot side down"
    return Nusselt(
        name=name,
        value=0.27 * rayleigh**0.25,
        length=AREA_OVER_PERIMETER,
        scatter=0.20,
        flags=Range("Ra", 1e5, 1e10).check(rayleigh, name),
    )


def radziemska_lewandowski_down(rayleigh: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a horizontal plate, hot side down or cold side up, by the newer law.

    Nu_L = 0.52 Ra^(1/5)

    Arguments: rayleigh Ra [1] with L = area over perimeter, 1e4 to 1e9; prandtl [1], from 0.7 up. Film
    temperature. Source: E. Radziemska, W. M. Lewandowski, Applied Energy 68 (2001) 347-366; Incropera, 7th
    ed. Usual scatter 20 %.

    Examples:
    >>> round(radziemska_lewandowski_down(1e7, 0.71).value, 3)
    13.062

    """
    name = "Radziemska and Lewandowski, horizontal plate, hot side down"
    flags = Range("Ra", 1e4, 1e9).check(rayleigh, name) + PRANDTL_FROM_AIR.check(prandtl, name)
    return Nusselt(name, 0.52 * rayleigh**0.2, AREA_OVER_PERIMETER, 0.20, flags)


PRANDTL_FROM_AIR = Range("Pr", 0.68)
"""Books write Pr >= 0.7 and mean air, whose Prandtl number is 0.697 to 0.715 from 250 to 500 K."""
