"""Forced convection across a single cylinder. Re = V D/nu with the velocity ahead of it. All groups [1]."""

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.free_plate import PRANDTL_FROM_AIR
from finback.models.correlations.nusselt import Bands, Nusselt, banded_power
from finback.models.validity import Range

Values = float | NDArray[np.float64]

DIAMETER = "diameter"

ZUKAUSKAS_BANDS: Bands = (
    (1.0, 40.0, 0.75, 0.4),
    (40.0, 1e3, 0.51, 0.5),
    (1e3, 2e5, 0.26, 0.6),
    (2e5, 1e6, 0.076, 0.7),
)
"""Re from, Re to, C, m of the single cylinder [1]."""


def churchill_bernstein(reynolds: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a cylinder in cross flow over the whole range of Re.

    Nu_D = 0.3 + 0.62 Re^(1/2) Pr^(1/3)/[1 + (0.4/Pr)^(2/3)]^(1/4) [1 + (Re/282000)^(5/8)]^(4/5)

    Arguments: reynolds Re_D [1], up to 1e7; prandtl [1]; Re Pr from 0.2 up. Film temperature.
    Source: S. W. Churchill, M. Bernstein, J. Heat Transfer 99 (1977) 300-306; Incropera, 6th ed., eq. 7.54.
    The authors call it a lower bound and give 1 + (Re/282000)^(1/2) as last factor for 2e4 < Re < 4e5, 10 to
    15 % more, which is not applied here. Usual scatter 15 %.

    Examples:
    >>> round(churchill_bernstein(1e4, 0.7).value, 3)
    53.328

    """
    name = "Churchill and Bernstein, cylinder in cross flow"
    slow = 0.62 * reynolds**0.5 * prandtl ** (1 / 3) / (1 + (0.4 / prandtl) ** (2 / 3)) ** 0.25
    return Nusselt(
        name=name,
        value=0.3 + slow * (1 + (reynolds / 282000) ** (5 / 8)) ** (4 / 5),
        length=DIAMETER,
        scatter=0.15,
        flags=Range("Re Pr", 0.2).check(reynolds * prandtl, name)
        + Range("Re", high=1e7).check(reynolds, name),
    )


def hilpert(reynolds: Values, prandtl: Values) -> Nusselt:
    """Return Nu of a circular cylinder in cross flow by power laws in five bands.

    Nu_D = C Re^m Pr^(1/3), with C and m: 0.989, 0.330 (0.4 to 4); 0.911, 0.385 (to 40); 0.683, 0.466 (to
    4000); 0.193, 0.618 (to 4e4); 0.027, 0.805 (to 4e5).

    Arguments: reynolds Re_D [1], 0.4 to 4e5; prandtl [1], from 0.7 up. Film temperature.
    Source: R. Hilpert, Forsch. Geb. Ingenieurwes. 4 (1933) 215-224, with Pr^(1/3) after J. D. Knudsen, D. L.
    Katz (1958); Incropera, 6th ed., Table 7.2. Holman, 10th ed., Table 6-2, prints 0.0266 in the last band.
    Usual scatter 15 %.

    Examples:
    >>> round(hilpert(1000.0, 0.7).value, 3)
    15.163

    """
    name = "Hilpert, cylinder in cross flow"
    bands = (
        (0.4, 4.0, 0.989, 0.33),
        (4.0, 40.0, 0.911, 0.385),
        (40.0, 4e3, 0.683, 0.466),
        (4e3, 4e4, 0.193, 0.618),
        (4e4, 4e5, 0.027, 0.805),
    )
    return Nusselt(
        name=name,
        value=banded_power(reynolds, bands) * prandtl ** (1 / 3),
        length=DIAMETER,
        scatter=0.15,
        flags=Range("Re", 0.4, 4e5).check(reynolds, name) + PRANDTL_FROM_AIR.check(prandtl, name),
    )


def zukauskas_cylinder(reynolds: Values, prandtl: Values, surface_prandtl: Values) -> Nusselt:
    """Return Nu of a cylinder in cross flow with properties of the free stream.

    Nu_D = C Re^m Pr^n (Pr/Pr_s)^(1/4), n = 0.37 for Pr up to 10 and 0.36 above, with C and m: 0.75, 0.4 (1 to
    40); 0.51, 0.5 (to 1e3); 0.26, 0.6 (to 2e5); 0.076, 0.7 (to 1e6).

    Arguments: reynolds Re_D [1], 1 to 1e6, and prandtl Pr [1], 0.7 to 500, both at the free stream's
    temperature; surface_prandtl Pr_s [1] at the surface's.
    Source: A. Zukauskas, Advances in Heat Transfer 8 (1972) 93-160; Incropera, 6th ed., eq. 7.53, Table 7.4.
    Usual scatter 15 %.

    Examples:
    >>> round(zukauskas_cylinder(7992.0, 0.707, 0.69).value, 2)
    50.52

    """
    name = "Zukauskas, cylinder in cross flow"
    power = np.where(np.asarray(prandtl) <= 10, 0.37, 0.36)[()]
    return Nusselt(
        name=name,
        value=banded_power(reynolds, ZUKAUSKAS_BANDS) * prandtl**power * (prandtl / surface_prandtl) ** 0.25,
        length=DIAMETER,
        scatter=0.15,
        flags=Range("Re", 1.0, 1e6).check(reynolds, name) + Range("Pr", 0.68, 500.0).check(prandtl, name),
    )
