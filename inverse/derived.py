"""What follows from a problem's parameters: the quantities that are reported beside them."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models import (
    Fin,
    Profile,
    Radiating,
    Solution,
    effectiveness,
    efficiency,
    heat_parts,
    solve,
    transverse_biot,
)
from finback.models.constants import STEFAN_BOLTZMANN
from finback.parameters import SHARED_ERRORS, ZERO_CELSIUS
from finback.problem import Problem

Array = NDArray[np.float64]

PLACES_LOOKED_AT = 65  # along a fin, for where it is thickest


@dataclass(frozen=True, slots=True)
class Meaning:
    """What a derived quantity is called, and the unit it is reported in."""

    label: str
    unit: str


DERIVED: Mapping[str, Meaning] = {
    "h_over_k": Meaning("ratio h/k", "1/m"),
    "m": Meaning("fin parameter m", "1/m"),
    "joint_times_k": Meaning("product R''·k", "m"),
    "base_temperature": Meaning("base temperature", "degC"),
    "heat": Meaning("heat into the fin", "W"),
    "base_heat_flux": Meaning("heat flux at the base", "W/m^2"),
    "heat_convected": Meaning("heat to the air", "W"),
    "heat_radiated": Meaning("heat radiated", "W"),
    "plate_heat": Meaning("heat from the plate in all", "W"),
    "efficiency": Meaning("fin efficiency", "1"),
    "effectiveness": Meaning("fin effectiveness", "1"),
    "transverse_biot": Meaning("transverse Biot number", "1"),
}


def evaluate(problem: Problem, z: Array, changes: Mapping[str, float] | None = None) -> dict[str, Array]:
    """Return every parameter and derived quantity of a block z (n_sets, p): SI units, shape (n_sets,) each.

    `changes` replaces lengths [m].
    A candidate without a joint has none, and no product with k; one that does not radiate has no parts of its
    heat, and a rig without a plate no heat of it.
    """
    values = problem.values(z)
    fin, base, air = problem.build(values, changes)
    solution = solve(fin, base, air, np.zeros(0))
    area = float(fin.profile.area(np.zeros(1))[0])
    perimeter = float(fin.profile.perimeter(np.zeros(1))[0])
    h, k = np.asarray(values["h"]), np.asarray(values["k"])
    found = {
        name: np.broadcast_to(np.asarray(value, dtype=np.float64), len(z))
        for name, value in values.items()
        if name not in SHARED_ERRORS
    }
    found |= {
        "h_over_k": h / k,
        "m": np.sqrt(h / k * (perimeter / area)),
        "base_temperature": solution.base_temperature,
        "heat": solution.base_heat,
        "base_heat_flux": solution.base_heat / area,
        "efficiency": efficiency(fin, solution, air),
        "effectiveness": effectiveness(fin, solution, air),
        "transverse_biot": np.asarray(
            transverse_biot(_at_base(fin, solution, h), *_thickest(fin.profile), k)
        ),
    }
    if "emissivity" in values:
        parts = heat_parts(fin, solution)
        found |= {"heat_convected": parts.convective, "heat_radiated": parts.radiative}
    if problem.rig.plate is not None:
        found["plate_heat"] = problem.heats(values, fin, solution).total
    if "joint" in values:
        found["joint_times_k"] = np.asarray(values["joint"]) * k
    return found


def _at_base(fin: Fin, solution: Solution, h: Array) -> Array:
    """Return h [W/(m² K)] with what a radiating side adds to it at the base, where that is most."""
    if not isinstance(fin.surface, Radiating):
        return h
    hot = solution.base_temperature
    radiated = 4 * STEFAN_BOLTZMANN * np.asarray(fin.surface.emissivity) * hot**3
    return np.asarray(h + radiated)


def _thickest(profile: Profile) -> tuple[float, float]:
    """Return section [m²] and perimeter [m] where the one is largest for the other, and so a fin thickest."""
    x = np.linspace(0.0, profile.length, PLACES_LOOKED_AT)
    area, perimeter = profile.area(x), profile.perimeter(x)
    at = int(np.argmax(np.divide(area, perimeter, out=np.zeros_like(area), where=perimeter > 0)))
    return float(area[at]), float(perimeter[at])


def gradients(problem: Problem, z: Array) -> dict[str, Array]:
    """Return d quantity/d z of the physical parameters at z (p,), by name, each of shape (n_physical,)."""
    n = problem.n_physical
    step = 1e-5
    offsets = np.zeros((2 * n, len(z)))
    offsets[:n, :n] = step * np.eye(n)
    offsets[n:, :n] = -step * np.eye(n)
    found = evaluate(problem, z + offsets)
    return {name: (values[:n] - values[n:]) / (2 * step) for name, values in found.items()}


def reported(name: str, values: Array) -> Array:
    """Return SI values of a derived quantity in its reported unit: temperatures in degC."""
    return values - ZERO_CELSIUS if DERIVED[name].unit == "degC" else values
