"""Fins of every shape, for the tests of their solutions: all of one length, about as thick at the base."""

import numpy as np

from finback.models import (
    Annular,
    ConcaveParabolic,
    ConcavePin,
    Cone,
    ConvexParabolic,
    ConvexPin,
    HyperbolicAnnular,
    Table,
    Trapezoidal,
    Triangular,
    pin,
)

LENGTH = 0.05
STRAIGHT = {"length": LENGTH, "width": 0.2, "thickness": 0.004}
GUARDED = STRAIGHT | {"guarded_edges": True}
ROUND = {"length": LENGTH, "diameter": 0.006}
RING = {"inner_diameter": 0.03, "outer_diameter": 0.03 + 2 * LENGTH, "thickness": 0.002}

BLUNT = {
    "trapezoidal": Trapezoidal(**GUARDED, tip_thickness=0.0015),
    "thin-tipped trapezoidal": Trapezoidal(**GUARDED, tip_thickness=4e-6),
    "truncated cone": Cone(**ROUND, tip_diameter=0.002),
    "thin-tipped cone": Cone(**ROUND, tip_diameter=6e-6),
    "annular": Annular(**RING),
    "wide annular": Annular(0.002, 0.002 + 2 * LENGTH, 0.001),
    "narrow annular": Annular(3.0, 3.0 + 2 * LENGTH, 0.002),
    "hyperbolic annular": HyperbolicAnnular(**RING),
}
SHARP = {
    "triangular": Triangular(**GUARDED),
    "concave parabolic": ConcaveParabolic(**GUARDED),
    "convex parabolic": ConvexParabolic(**GUARDED),
    "cone": Cone(**ROUND),
    "concave pin": ConcavePin(**ROUND),
    "convex pin": ConvexPin(**ROUND),
}
CLOSED = BLUNT | SHARP
"""Shapes with a closed form in Bessel functions."""

OTHER_BLUNT = {
    "exposed trapezoidal": Trapezoidal(**STRAIGHT, tip_thickness=0.001),
    "flared": Trapezoidal(**GUARDED, tip_thickness=0.012),
    "almost uniform": Cone(**ROUND, tip_diameter=0.006 * (1 - 1e-5)),
    "slant cone": Cone(**ROUND, tip_diameter=0.001, slant_surface=True),
    "slant hyperbolic": HyperbolicAnnular(**RING | {"thickness": 0.02}, slant_surface=True),
    "turned shaft": Table(
        [0, 0.02, 0.02, 0.035, 0.05],
        np.pi / 4 * np.array([6e-3, 6e-3, 3e-3, 4e-3, 4e-3]) ** 2,
        np.pi * np.array([6e-3, 6e-3, 3e-3, 4e-3, 4e-3]),
    ),
}
OTHER_SHARP = {
    "exposed triangular": Triangular(**STRAIGHT),
    "slant concave": ConcaveParabolic(**STRAIGHT, slant_surface=True),
    "slant convex": ConvexParabolic(**STRAIGHT, slant_surface=True),
    "slant concave pin": ConcavePin(**ROUND, slant_surface=True),
    "slant convex pin": ConvexPin(**ROUND, slant_surface=True),
}
ALL = CLOSED | OTHER_BLUNT | OTHER_SHARP | {"pin": pin(**ROUND)}


def base_ratio(profile):
    """Return P/A at the base [1/m]."""
    zero = np.zeros(1)
    return float(profile.perimeter(zero)[0] / profile.area(zero)[0])


def coefficient(profile, mL, k):
    """Return the coefficient [W/(m² K)] that makes m L at the base what is asked for."""
    return (np.asarray(mL) / profile.length) ** 2 * k / base_ratio(profile)
