"""Forward physics of fins: profiles, ends, surface laws and their solutions, in SI units. Knows no data."""

from finback.models.conductivity import (
    Conductivity,
    ConstantConductivity,
    LinearConductivity,
    TabulatedConductivity,
)
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
from finback.models.surface import (
    PowerCoefficient,
    Radiating,
    SurfaceLaw,
    TabledCoefficient,
    UniformCoefficient,
    VaryingCoefficient,
)
from finback.models.validity import is_one_dimensional, transverse_biot

__all__ = [
    "AdiabaticTip",
    "Annular",
    "Base",
    "BaseTemperature",
    "ConcaveParabolic",
    "ConcavePin",
    "Conductivity",
    "Cone",
    "ConstantConductivity",
    "ConvectiveTip",
    "ConvexParabolic",
    "ConvexPin",
    "Fin",
    "FixedTip",
    "HyperbolicAnnular",
    "InfiniteTip",
    "Joint",
    "LinearConductivity",
    "PowerCoefficient",
    "Profile",
    "Radiating",
    "Solution",
    "SurfaceLaw",
    "Table",
    "TabledCoefficient",
    "TabulatedConductivity",
    "Tip",
    "Trapezoidal",
    "Triangular",
    "Uniform",
    "UniformCoefficient",
    "VaryingCoefficient",
    "effectiveness",
    "efficiency",
    "is_one_dimensional",
    "pin",
    "rectangular",
    "solve",
    "transverse_biot",
]
