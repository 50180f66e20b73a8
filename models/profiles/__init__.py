"""Profiles: the shape of a fin as its cross-section and perimeter along x, with x = 0 at the base.

A profile is geometry only: anything with the members of `Profile` is one, and a new shape is one new class.
Lengths in m, areas in m².
"""

from finback.models.profiles.annular import Annular, HyperbolicAnnular
from finback.models.profiles.pins import ConcavePin, Cone, ConvexPin, TaperedPin
from finback.models.profiles.protocol import Profile
from finback.models.profiles.straight import (
    ConcaveParabolic,
    ConvexParabolic,
    StraightFin,
    Trapezoidal,
    Triangular,
)
from finback.models.profiles.table import Table
from finback.models.profiles.uniform import Uniform, pin, rectangular

__all__ = [
    "Annular",
    "ConcaveParabolic",
    "ConcavePin",
    "Cone",
    "ConvexParabolic",
    "ConvexPin",
    "HyperbolicAnnular",
    "Profile",
    "StraightFin",
    "Table",
    "TaperedPin",
    "Trapezoidal",
    "Triangular",
    "Uniform",
    "pin",
    "rectangular",
]
