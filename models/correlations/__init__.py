"""Correlations of convection: one function each, named by its authors, with its range as code.

By flow: `free_plate` and `free_cylinder`, `forced_plate` and `forced_cylinder`, `channels` between fins,
`banks` of pins, `ducts`. Each takes dimensionless groups, floats or arrays, and returns a `Nusselt`.
"""

from finback.models.correlations.banks import Layout, narrowest_velocity, zukauskas_bank
from finback.models.correlations.channels import Walls, bar_cohen_rohsenow, elenbaas, teertstra
from finback.models.correlations.ducts import dittus_boelter, gnielinski, hausen_laminar, petukhov_friction
from finback.models.correlations.forced_cylinder import churchill_bernstein, hilpert, zukauskas_cylinder
from finback.models.correlations.forced_plate import (
    TRANSITION,
    churchill_ozoe,
    flat_plate_laminar,
    flat_plate_mixed,
    flat_plate_turbulent,
)
from finback.models.correlations.free_cylinder import (
    churchill_chu_cylinder,
    churchill_chu_cylinder_laminar,
    morgan_cylinder,
    popiel_vertical_cylinder,
)
from finback.models.correlations.free_plate import (
    churchill_chu_vertical_all,
    churchill_chu_vertical_laminar,
    horizontal_plate_down,
    horizontal_plate_up,
    mcadams_vertical,
    radziemska_lewandowski_down,
)
from finback.models.correlations.nusselt import Nusselt

__all__ = [
    "TRANSITION",
    "Layout",
    "Nusselt",
    "Walls",
    "bar_cohen_rohsenow",
    "churchill_bernstein",
    "churchill_chu_cylinder",
    "churchill_chu_cylinder_laminar",
    "churchill_chu_vertical_all",
    "churchill_chu_vertical_laminar",
    "churchill_ozoe",
    "dittus_boelter",
    "elenbaas",
    "flat_plate_laminar",
    "flat_plate_mixed",
    "flat_plate_turbulent",
    "gnielinski",
    "hausen_laminar",
    "hilpert",
    "horizontal_plate_down",
    "horizontal_plate_up",
    "mcadams_vertical",
    "morgan_cylinder",
    "narrowest_velocity",
    "petukhov_friction",
    "popiel_vertical_cylinder",
    "radziemska_lewandowski_down",
    "teertstra",
    "zukauskas_bank",
    "zukauskas_cylinder",
]
