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
from finback.models.performance import HeatParts, effectiveness, efficiency, heat_parts
from finback.models.plate import Plate, PlateHeat, heat_of_one_fin, plate_heat
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
    "HeatParts",
    "HyperbolicAnnular",
    "InfiniteTip",
    "Joint",
    "LinearConductivity",
    "Plate",
    "PlateHeat",
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
    "heat_of_one_fin",
    "heat_parts",
    "is_one_dimensional",
    "pin",
    "plate_heat",
    "rectangular",
    "solve",
    "transverse_biot",
]
