"""The two solutions of each shape's fin equation that have a closed form, in exponentially scaled functions.

`down` dies away from the base towards the tip, `up` from the tip towards the base. Both are written as an
amplitude times an exponential, down(x) exp(-phase(x)) and up(x) exp(+phase(x)), phase(0) = 0, so that nothing
overflows however large m L is. m² = h P/(k A) at the base, s = L - x, and I and K are modified Bessel
functions; a shape with a sharp tip has one solution that stays finite there, and no `up`.

    trapezoidal, triangular   I0(z), K0(z),  z = 2 m (a s')^(1/2), a and s' from the base and x to the apex
    cone                      I1(z)/z, K1(z)/z, the same z
    concave parabolic         (s/L)^p, p (p + 1) = (m L)²; of a pin p (p + 3) = (m L)²
    convex parabolic          z^(1/3) I_-1/3(z), z = 4/3 m L (s/L)^(3/4); of a pin I0(z)
    annular                   K0(m r), I0(m r)
    hyperbolic annular        r^(1/2) K_1/3(z), r^(1/2) I_-1/3(z), z = 2/3 m r^(3/2)/r1^(1/2)

Sources: Gardner, Efficiency of extended surface, Trans. ASME 67 (1945) 621; Kraus, Aziz, Welty, Extended
Surface Heat Transfer, Wiley 2001, chapters 1 to 3. Derivatives: NIST Digital Library of Mathematical
Functions, 10.29.4.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import i0e, i1e, ive, k0e, k1e, kve

from finback.models.profiles import (
    Annular,
    ConcaveParabolic,
    ConcavePin,
    Cone,
    ConvexParabolic,
    ConvexPin,
    HyperbolicAnnular,
    Profile,
    Trapezoidal,
    Triangular,
)

Array = NDArray[np.float64]

SMALLEST = 1e-300
"""Where a function of z = 0 is needed, its value here is the limit [1]."""


@dataclass(frozen=True, slots=True)
class Waves:
    """Amplitudes of the two solutions, and of their falls -A d/dx [m] (both exponentials left out).

    phase, down, up: at all positions, shape (n_sets, n_x) [1]; down_fall, up_fall: at the first two positions
    alone, which are base and tip, shape (n_sets, 2). up and up_fall are None where the tip is sharp.
    """

    phase: Array
    down: Array
    down_fall: Array
    up: Array | None = None
    up_fall: Array | None = None


@dataclass(frozen=True, slots=True)
class Form:
    """A closed form: the ratio P/A [1/m] at the base of a profile, and its waves.

    `waves(profile, m, x)` takes m [1/m] of shape (n_sets, 1) and positions x [m], base and tip first.
    """

    perimeter_over_area: Callable[[Any], float]
    waves: Callable[[Any, Array, Array], Waves]


def form_of(profile: Profile) -> Form | None:
    """Return the closed form of a profile, or None where it has none that is exact."""
    form = FORMS.get(type(profile))
    return form if form is not None and _is_exact(profile) else None


SLIGHTEST_TAPER = 1e-3
"""Relative taper [1] below which the two solutions are so alike that digits are lost."""


def _is_exact(profile: Any) -> bool:
    if getattr(profile, "slant_surface", False) or not getattr(profile, "guarded_edges", True):
        return False
    if isinstance(profile, Trapezoidal):
        return profile.tip_thickness <= (1 - SLIGHTEST_TAPER) * profile.thickness
    if isinstance(profile, Cone):
        return profile.tip_diameter <= (1 - SLIGHTEST_TAPER) * profile.diameter
    if isinstance(profile, Annular | HyperbolicAnnular):
        return profile.outer_diameter >= (1 + SLIGHTEST_TAPER) * profile.inner_diameter
    return True


def _wedge(fin: Trapezoidal | Triangular, m: Array, x: Array) -> Waves:
    tip = fin.tip_thickness if isinstance(fin, Trapezoidal) else 0.0
    apex = fin.length * fin.thickness / (fin.thickness - tip)
    share = np.sqrt(fin.thickness_at(x) / fin.thickness)
    z = 2 * m * apex * share
    ends = fin.width * fin.thickness * m * share[:2]
    phase = 2 * m * (x / (1 + share))
    if tip == 0:
        return Waves(phase, i0e(z), ends * i1e(z[:, :2]))
    return Waves(phase, i0e(z), ends * i1e(z[:, :2]), k0e(z), -ends * k1e(z[:, :2]))


def _cone(fin: Cone, m: Array, x: Array) -> Waves:
    apex = fin.length * fin.diameter / (fin.diameter - fin.tip_diameter)
    share = np.sqrt(fin.diameter_at(x) / fin.diameter)
    z = np.maximum(2 * m * apex * share, SMALLEST)
    ends = np.pi / 4 * fin.diameter**2 * m * share[:2] ** 3 / z[:, :2]
    phase = 2 * m * (x / (1 + share))
    if fin.tip_diameter == 0:
        return Waves(phase, i1e(z) / z, ends * ive(2, z[:, :2]))
    return Waves(phase, i1e(z) / z, ends * ive(2, z[:, :2]), k1e(z) / z, -ends * kve(2, z[:, :2]))


def _concave(fin: ConcaveParabolic | ConcavePin, m: Array, x: Array) -> Waves:
    dimension = 1 if isinstance(fin, ConcaveParabolic) else 3
    area = fin.area(np.zeros(1))
    mL = m * fin.length
    power = 2 * mL**2 / (dimension + np.sqrt(dimension**2 + 4 * mL**2))
    with np.errstate(divide="ignore"):  # at the tip the phase is endless, the temperature zero
        phase = power * -np.log((fin.length - x) / fin.length)
    fall = area * power / fin.length * np.array([1.0, 0.0])
    return Waves(phase, np.ones_like(phase), fall)


def _convex(fin: ConvexParabolic, m: Array, x: Array) -> Waves:
    z, phase = _rounded(fin.length, m, x)
    fall = fin.width * fin.thickness * m * np.cbrt(z[:, :1]) * ive(2 / 3, z[:, :1])
    return Waves(phase, np.cbrt(z) * ive(-1 / 3, z), fall * np.array([1.0, 0.0]))


def _convex_pin(fin: ConvexPin, m: Array, x: Array) -> Waves:
    z, phase = _rounded(fin.length, m, x)
    fall = np.pi / 4 * fin.diameter**2 * m * i1e(z[:, :1])
    return Waves(phase, i0e(z), fall * np.array([1.0, 0.0]))


def _rounded(length: float, m: Array, x: Array) -> tuple[Array, Array]:
    share = ((length - x) / length) ** 0.75
    at_base = 4 / 3 * length * m
    return np.maximum(at_base * share, SMALLEST), at_base * (1 - share)


def _ring(fin: Annular, m: Array, x: Array) -> Waves:
    z = m * fin.radius(x)
    ends = m * fin.area(x[:2])
    return Waves(m * x, k0e(z), ends * k1e(z[:, :2]), i0e(z), -ends * i1e(z[:, :2]))


def _hyperbolic(fin: HyperbolicAnnular, m: Array, x: Array) -> Waves:
    inner, r = fin.inner_diameter / 2, fin.radius(x)
    at_base = 2 / 3 * inner * m
    z = at_base * (r / inner) ** 1.5
    phase = at_base * np.expm1(1.5 * np.log1p(x / inner))
    root, ends = np.sqrt(r), fin.area(x[:2]) * m * r[:2] / np.sqrt(inner)
    return Waves(
        phase,
        root * kve(1 / 3, z),
        ends * kve(2 / 3, z[:, :2]),
        root * ive(-1 / 3, z),
        -ends * ive(2 / 3, z[:, :2]),
    )


FORMS: dict[type, Form] = {
    Trapezoidal: Form(lambda fin: 2 / fin.thickness, _wedge),
    Triangular: Form(lambda fin: 2 / fin.thickness, _wedge),
    ConcaveParabolic: Form(lambda fin: 2 / fin.thickness, _concave),
    ConvexParabolic: Form(lambda fin: 2 / fin.thickness, _convex),
    Cone: Form(lambda fin: 4 / fin.diameter, _cone),
    ConcavePin: Form(lambda fin: 4 / fin.diameter, _concave),
    ConvexPin: Form(lambda fin: 4 / fin.diameter, _convex_pin),
    Annular: Form(lambda fin: 2 / fin.thickness, _ring),
    HyperbolicAnnular: Form(lambda fin: 2 / fin.thickness, _hyperbolic),
}
