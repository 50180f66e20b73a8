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
from finback.models.profiles import Profile, Uniform, pin, rectangular
from finback.models.solution import Solution
from finback.models.solve import solve
from finback.models.surface import SurfaceLaw, UniformCoefficient
from finback.models.validity import is_one_dimensional, transverse_biot

__all__ = [
    "AdiabaticTip",
    "Base",
    "BaseTemperature",
    "ConvectiveTip",
    "Fin",
    "FixedTip",
    "InfiniteTip",
    "Joint",
    "Profile",
    "Solution",
    "SurfaceLaw",
    "Tip",
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
