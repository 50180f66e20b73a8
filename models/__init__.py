"""Forward physics of fins: profiles, ends, surface laws and their solutions, in SI units. Knows no data."""

from finback.models.ends import (
    AdiabaticTip,
    Base,
    BaseTemperature,
    ConvectiveTip,
    FixedTip,
    InfiniteTip,
    Joint,
    Tip,
)
from finback.models.fin import Fin
from finback.models.performance import effectiveness, efficiency
from finback.models.profiles import (
    Annular,
    ConcaveParabolic,
    ConcavePin,
    Cone,
    ConvexParabolic,
    ConvexPin,
    HyperbolicAnnular,
    Profile,
    Table,
    Trapezoidal,
    Triangular,
    Uniform,
    pin,
    rectangular,
)
from finback.models.solution import Solution
from finback.models.solve import solve
from finback.models.surface import SurfaceLaw, UniformCoefficient
from finback.models.validity import is_one_dimensional, transverse_biot

__all__ = [
    "AdiabaticTip",
    "Annular",
    "Base",
    "BaseTemperature",
    "ConcaveParabolic",
    "ConcavePin",
    "Cone",
    "ConvectiveTip",
    "ConvexParabolic",
    "ConvexPin",
    "Fin",
    "FixedTip",
    "HyperbolicAnnular",
    "InfiniteTip",
    "Joint",
    "Profile",
    "Solution",
    "SurfaceLaw",
    "Table",
    "Tip",
    "Trapezoidal",
    "Triangular",
    "Uniform",
    "UniformCoefficient",
    "effectiveness",
    "efficiency",
    "is_one_dimensional",
    "pin",
    "rectangular",
    "solve",
    "transverse_biot",
]
