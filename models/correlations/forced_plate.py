"""Forced convection along a flat plate, averaged over its length L. Re = V L/nu. All groups [1].

The plate is at one temperature, its leading edge is sharp and the flow meets it along its faces. Properties
at the film temperature.
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.nusselt import Nusselt
from finback.models.validity import Flag, Range

Values = float | NDArray[np.float64]

LENGTH = "length along the flow"
TRANSITION = 5e5
"""Re_L at which a boundary layer in a quiet stream usually turns turbulent [1]."""


def flat_plate_laminar(reynolds: Values, prandtl: Values) -> Nusselt:
    """Return the mean Nu of a plate in laminar flow.

    Nu_L = 0.664 Re_L^(1/2) Pr^(1/3)

    Arguments: reynolds Re_L [1], below 5e5; prandtl [1], from 0.6 up. Film temperature.
    Source: E. Pohlhausen, Z. angew. Math. Mech. 1 (1921) 115-121; Incropera, 6th ed., eq. 7.30. Exact for an
    ideal plate; usual scatter 10 % for blunt edges and turbulence of the stream.

    Examples:
    >>> round(flat_plate_laminar(1e5, 0.7).value, 2)
    186.44

    """
    name = "Pohlhausen, flat plate, laminar"
    return Nusselt(
        name=name,
        value=0.664 * reynolds**0.5 * prandtl ** (1 / 3),
        length=LENGTH,
        scatter=0.10,
        flags=Range("Re", 0.0, TRANSITION, open_low=True).check(reynolds, name)
        + Range("Pr", 0.6).check(prandtl, name),
    )


def churchill_ozoe(reynolds: Values, prandtl: Values) -> Nusselt:
    """Return the mean Nu of a plate in laminar flow at any Pr: twice the local value at its end.

    Nu_x = 0.3387 Re_x^(1/2) Pr^(1/3)/[1 + (0.0468/Pr)^(2/3)]^(1/4), mean Nu_L = 2 Nu_x(L)

    Arguments: reynolds Re_L [1], below 5e5; prandtl [1]; Re Pr from 100 up. Film temperature.
    Source: S. W. Churchill, H. Ozoe, J. Heat Transfer 95 (1973) 78-84; Incropera, 6th ed., eq. 7.33. Usual
    scatter 10 %.

    Examples:
    >>> round(churchill_ozoe(1e5, 0.7).value, 2)
    183.09

    """
    name = "Churchill and Ozoe, flat plate, laminar"
    local = 0.3387 * reynolds**0.5 * prandtl ** (1 / 3) / (1 + (0.0468 / prandtl) ** (2 / 3)) ** 0.25
    return Nusselt(
        name=name,
        value=2 * local,
        length=LENGTH,
        scatter=0.10,
        flags=Range("Re", 0.0, TRANSITION, open_low=True).check(reynolds, name)
        + Range("Re Pr", 100.0).check(reynolds * prandtl, name),
    )


def flat_plate_turbulent(reynolds: Values, prandtl: Values) -> Nusselt:
    """Return the mean Nu of a plate whose boundary layer is turbulent from the leading edge.

    Nu_L = 0.037 Re_L^(4/5) Pr^(1/3)

    Arguments: reynolds Re_L [1], above 5e5 to 1e8 (tripped layers lower down); prandtl [1], 0.6 to 60. Film
    temperature. Source: Incropera, 6th ed., eq. 7.38 with A = 0, from Schlichting's friction and the analogy
    of Chilton and Colburn. Some books print 0.036. Usual scatter 15 %.

    Examples:
    >>> round(flat_plate_turbulent(1e6, 0.7).value, 1)
    2072.8

    """
    name = "Chilton and Colburn, flat plate, turbulent"
    return Nusselt(
        name=name,
        value=0.037 * reynolds**0.8 * prandtl ** (1 / 3),
        length=LENGTH,
        scatter=0.15,
        flags=_turbulent_range(name, reynolds, prandtl),
    )


def flat_plate_mixed(reynolds: Values, prandtl: Values) -> Nusselt:
    """Return the mean Nu of a plate that is laminar up to Re_x = 5e5 and turbulent behind.

    Nu_L = (0.037 Re_L^(4/5) - 871) Pr^(1/3)

    Arguments: reynolds Re_L [1], above 5e5 to 1e8; prandtl [1], 0.6 to 60. Film temperature.
    Source: Incropera, 6th ed., eqs. 7.38 and 7.39; the constant is the books', 871.32 to five digits. Usual
    scatter 20 %, because the transition may lie anywhere from 1e5 to 3e6.

    Examples:
    >>> round(flat_plate_mixed(1e6, 0.7).value, 1)
    1299.5

    """
    name = "Chilton and Colburn, flat plate, laminar then turbulent"
    return Nusselt(
        name=name,
        value=(0.037 * reynolds**0.8 - 871) * prandtl ** (1 / 3),
        length=LENGTH,
        scatter=0.20,
        flags=_turbulent_range(name, reynolds, prandtl),
    )


def _turbulent_range(name: str, reynolds: Values, prandtl: Values) -> tuple[Flag, ...]:
    return Range("Re", TRANSITION, 1e8, open_low=True).check(reynolds, name) + Range("Pr", 0.6, 60.0).check(
        prandtl, name
    )
