"""Flow inside ducts, with the coefficient on T_s - T_bulk and properties at the bulk mean. All groups [1].

Re = V D/nu with D the diameter, or the hydraulic diameter 4 A/P of another section: for the gap b between
wide fins, 2 b.
"""

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.nusselt import Nusselt
from finback.models.validity import Flag, Range

Values = float | NDArray[np.float64]

DIAMETER = "hydraulic diameter"


def petukhov_friction(reynolds: Values) -> Values:
    """Return Darcy's friction factor [1] of a smooth duct, f = (0.790 ln Re - 1.64)⁻².

    Argument: reynolds [1], 3000 to 5e6. Source: B. S. Petukhov, Advances in Heat Transfer 6 (1970) 503.

    Examples:
    >>> round(float(petukhov_friction(2e4)), 5)
    0.02615

    """
    return (0.790 * np.log(reynolds) - 1.64) ** -2.0


def gnielinski(reynolds: Values, prandtl: Values, friction: Values | None = None) -> Nusselt:
    """Return Nu of turbulent flow in a duct, the transition included.

    Nu_D = (f/8) (Re - 1000) Pr/[1 + 12.7 (f/8)^(1/2) (Pr^(2/3) - 1)]

    Arguments: reynolds Re_D [1], 3000 to 5e6; prandtl [1], 0.5 to 2000; friction f [1], Darcy's, of a smooth
    duct by `petukhov_friction` when left out. Bulk mean temperature.
    Source: V. Gnielinski, Int. Chem. Eng. 16 (1976) 359-368; Incropera, 6th ed., eqs. 8.21 and 8.62. Usual
    scatter 10 %.

    Examples:
    >>> round(float(gnielinski(2e4, 0.7).value), 3)
    51.371

    """
    name = "Gnielinski, turbulent duct"
    eighth = (petukhov_friction(reynolds) if friction is None else friction) / 8
    return Nusselt(
        name=name,
        value=eighth * (reynolds - 1000) * prandtl / (1 + 12.7 * eighth**0.5 * (prandtl ** (2 / 3) - 1)),
        length=DIAMETER,
        scatter=0.10,
        flags=Range("Re", 3e3, 5e6).check(reynolds, name) + Range("Pr", 0.5, 2000.0).check(prandtl, name),
    )


def dittus_boelter(
    reynolds: Values, prandtl: Values, fluid_is_heated: bool, length_ratio: Values | None = None
) -> Nusselt:
    """Return Nu of turbulent flow in a smooth duct at small temperature differences.

    Nu_D = 0.023 Re^(4/5) Pr^n, n = 0.4 where the fluid is heated and 0.3 where it is cooled

    Arguments: reynolds Re_D [1], from 1e4 up; prandtl [1], 0.6 to 160; fluid_is_heated; length_ratio L/D [1],
    from 10 up, checked where it is given. Bulk mean temperature.
    Source: F. W. Dittus, L. M. K. Boelter, Univ. Calif. Publ. Eng. 2 (1930) 443; the factor 0.023 is McAdams'
    (1942), see R. H. S. Winterton, Int. J. Heat Mass Transfer 41 (1998) 809; Incropera, 6th ed., eq. 8.60.
    Usual scatter 15 %.

    Examples:
    >>> round(dittus_boelter(2e4, 0.7, fluid_is_heated=False).value, 3)
    57.027

    """
    name = "Dittus and Boelter, turbulent duct"
    flags = Range("Re", 1e4).check(reynolds, name) + Range("Pr", 0.6, 160.0).check(prandtl, name)
    if length_ratio is not None:
        flags += Range("L/D", 10.0).check(length_ratio, name)
    value = 0.023 * reynolds**0.8 * prandtl ** (0.4 if fluid_is_heated else 0.3)
    return Nusselt(name, value, DIAMETER, 0.15, flags)


def hausen_laminar(reynolds: Values, prandtl: Values, diameter_ratio: Values) -> Nusselt:
    """Return the mean Nu of laminar flow in a round isothermal tube while its temperature profile develops.

    Nu_D = 3.66 + 0.0668 Gz/(1 + 0.04 Gz^(2/3)), Gz = (D/L) Re Pr

    Arguments: reynolds Re_D [1], below 2300; prandtl [1]; diameter_ratio D/L [1]. The velocity profile is
    developed at the inlet, or Pr is large: for air entering with the tube, Nu is higher, and a Pr below 5 is
    flagged. Bulk mean temperature. The coefficient is on the log-mean temperature difference.
    Source: H. Hausen, Z. VDI Beih. Verfahrenstech. 4 (1943) 91-98; Incropera, 6th ed., eq. 8.56. Usual
    scatter 10 %.

    Examples:
    >>> round(hausen_laminar(1000.0, 0.7, 0.05).value, 3)
    5.297

    """
    name = "Hausen, laminar tube with thermal entry"
    graetz = diameter_ratio * reynolds * prandtl
    flags = Range("Re", 0.0, 2300.0, open_low=True).check(reynolds, name)
    if not bool(np.all(np.asarray(prandtl) >= 5)):
        note = f"{name} takes the velocity profile as developed: air that enters with the tube cools it more."
        flags += (Flag("Pr", note),)
    return Nusselt(name, 3.66 + 0.0668 * graetz / (1 + 0.04 * graetz ** (2 / 3)), "diameter", 0.10, flags)
