"""Banks of tubes or pins in cross flow. Re = V_max D/nu on the narrowest gap's velocity. All groups [1]."""

from enum import Enum

import numpy as np
from numpy.typing import NDArray

from finback.models.correlations.forced_cylinder import ZUKAUSKAS_BANDS
from finback.models.correlations.nusselt import Bands, Nusselt, banded_power
from finback.models.validity import Flag, Range

Values = float | NDArray[np.float64]

FULL_BANK = 20
"""Rows from which on a bank counts as deep [1]."""

_ROWS = (1, 2, 3, 4, 5, 7, 10, 13, 16, FULL_BANK)
_ROW_FACTORS = {
    "inline": (0.70, 0.80, 0.86, 0.90, 0.92, 0.95, 0.97, 0.98, 0.99, 1.0),
    "staggered": (0.64, 0.76, 0.84, 0.89, 0.92, 0.95, 0.97, 0.98, 0.99, 1.0),
}


class Layout(Enum):
    """How the rows of a bank stand behind one another."""

    INLINE = "inline"
    STAGGERED = "staggered"


def zukauskas_bank(
    reynolds: Values,
    prandtl: Values,
    surface_prandtl: Values,
    layout: Layout,
    rows: int,
    pitch_ratio: float,
) -> Nusselt:
    """Return the mean Nu of a bank of cylinders in cross flow.

    Nu_D = C2 C1 Re^m Pr^0.36 (Pr/Pr_s)^(1/4). In line, C1 and m: 0.80, 0.40 (Re 10 to 100); 0.27, 0.63 (1e3
    to 2e5); 0.021, 0.84 (to 2e6). Staggered: 0.90, 0.40 (10 to 100); 0.35 (S_T/S_L)^(1/5), or 0.40 from
    S_T/S_L = 2 up, 0.60 (1e3 to 2e5); 0.022, 0.84 (to 2e6). Between Re = 100 and 1000 a cylinder of the bank
    counts as a single one: C1, m = 0.51, 0.5 with Pr^0.37. C2 corrects for fewer than 20 rows, from Re = 1000
    up.

    Arguments: reynolds Re_D,max [1] on the velocity of `narrowest_velocity`; prandtl Pr [1], 0.7 to 500, at
    the mean of inlet and outlet temperature; surface_prandtl Pr_s [1]; layout; rows along the flow [1];
    pitch_ratio S_T/S_L [1], transverse over longitudinal. The coefficient is on the log-mean temperature
    difference. In line with S_T/S_L below 0.7 the flow short-circuits, and the law is flagged.
    Source: A. Zukauskas, Advances in Heat Transfer 8 (1972) 93-160; Incropera, 6th ed., eqs. 7.64 and 7.65,
    Tables 7.7 and 7.8; C2 between the table's rows by straight lines. Usual scatter 15 %.

    Examples:
    >>> round(zukauskas_bank(1e4, 0.7, 0.7, Layout.STAGGERED, rows=20, pitch_ratio=1.2).value, 3)
    80.194

    """
    name = f"Zukauskas, {'in-line' if layout is Layout.INLINE else 'staggered'} bank"
    if rows < 1:
        raise ValueError(f"a bank has one row or more, not {rows}")
    Re = np.asarray(reynolds, dtype=np.float64)
    alone = (Re > 100) & (Re < 1000)
    power = np.where(alone, 0.37, 0.36)
    depth = np.where(Re >= 1000, np.interp(rows, _ROWS, _ROW_FACTORS[layout.value]), 1.0)
    law = np.where(alone, banded_power(Re, ZUKAUSKAS_BANDS), banded_power(Re, _bands(layout, pitch_ratio)))
    value: Values = (depth * law * prandtl**power * (prandtl / surface_prandtl) ** 0.25)[()]
    flags = Range("Re", 10.0, 2e6).check(reynolds, name) + Range("Pr", 0.68, 500.0).check(prandtl, name)
    if layout is Layout.INLINE:
        flags += Range("S_T/S_L", 0.7).check(pitch_ratio, name)
    if rows < FULL_BANK and bool(np.any(Re < 1000)):
        flags += (
            Flag("rows", f"{name} has no correction for {rows} rows below Re of 1000; none is applied."),
        )
    return Nusselt(name, value, "diameter", 0.15, flags)


def _bands(layout: Layout, pitch_ratio: float) -> Bands:
    if layout is Layout.INLINE:
        return (10.0, 100.0, 0.80, 0.40), (100.0, 2e5, 0.27, 0.63), (2e5, 2e6, 0.021, 0.84)
    middle = 0.35 * pitch_ratio**0.2 if pitch_ratio < 2 else 0.40
    return (10.0, 100.0, 0.90, 0.40), (100.0, 2e5, middle, 0.60), (2e5, 2e6, 0.022, 0.84)


def narrowest_velocity(
    approach: Values, layout: Layout, diameter: float, transverse_pitch: float, longitudinal_pitch: float
) -> Values:
    """Return the velocity [m/s] in the narrowest gap of a bank.

    Arguments: approach, velocity ahead of the bank [m/s]; layout; diameter D [m]; transverse_pitch S_T [m],
    across the flow; longitudinal_pitch S_L [m], along it. V_max = V S_T/(S_T - D); staggered where the
    diagonal gaps are narrower, 2 (S_D - D) < S_T - D with S_D² = S_L² + (S_T/2)²: V S_T/(2 (S_D - D)).
    Raises ValueError where the cylinders touch. Source: Incropera, 6th ed., eqs. 7.62 and 7.63.

    Examples:
    Example 7.7 of that book, which prints 12.6 m/s:

    >>> round(narrowest_velocity(6.0, Layout.STAGGERED, 0.0164, 0.0313, 0.0343), 1)
    12.6

    """
    across = transverse_pitch - diameter
    diagonal = np.inf
    if layout is Layout.STAGGERED:
        diagonal = 2 * (np.hypot(longitudinal_pitch, transverse_pitch / 2) - diameter)
    elif longitudinal_pitch <= diameter:
        raise ValueError("the cylinders of a bank must not touch: give pitches larger than the diameter")
    if min(across, diagonal) <= 0:
        raise ValueError("the cylinders of a bank must not touch: give pitches larger than the diameter")
    return approach * transverse_pitch / min(across, diagonal)
