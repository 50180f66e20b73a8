"""Invented campaigns of a pin in a stream, whose truth is Hilpert's law in its band from Re = 40 to 4,000.

Each run has its own speed, known within a relative error as of a vane anemometer, and its own h, known within
3 to 8 % as of a fit, about a law that it scatters by 3 %.
"""

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from finback.models.air import air
from finback.rig import Rig

TRUTH = {"C": 0.683, "n": 0.466}
"""R. Hilpert, Forsch. Geb. Ingenieurwes. 4 (1933) 215, with Pr^(1/3); Incropera, 6th ed., Table 7.2."""

LOWEST, HIGHEST = 40.0, 4000.0
DIAMETER, AIR, SURFACE = 0.008, 295.0, 325.0
SCATTER = 0.03
H_ERRORS = (0.03, 0.08)

RIG = Rig.from_dict(
    {
        "title": "Invented pin in a stream",
        "fin": {"profile": "pin", "length": "90 mm", "diameter": "8 mm"},
        "sensors": {"T1": {"at": "10 mm"}, "T2": {"at": "50 mm"}, "T3": {"at": "80 mm"}},
    }
)


@dataclass(frozen=True)
class Runs:
    """What was measured: speed [m/s] and h [W/(m² K)], with the relative standard uncertainties of both."""

    speed: np.ndarray
    h: np.ndarray
    h_error: np.ndarray

    def write(self, path: Path) -> Path:
        """Write them as a table of results, as a batch does."""
        rows = ["run,status,h_median,h_sd,air_median,surface_temperature,speed [m/s]"]
        rows += [
            f"{i},ok,{h:.8g},{h * error:.8g},{AIR - 273.15:.2f},{SURFACE - 273.15:.2f},{speed:.8g}"
            for i, (h, error, speed) in enumerate(zip(self.h, self.h_error, self.speed, strict=True))
        ]
        path.write_text("\n".join(rows) + "\n", encoding="utf-8")
        return path


def draw(seed: list[int], runs: int, speed_error: float) -> Runs:
    """Draw one campaign. Arguments: seed; runs; speed_error, relative standard uncertainty of the speed."""
    random = np.random.default_rng(seed)
    beside = air((AIR + SURFACE) / 2)
    nu, k, prandtl = (float(x) for x in (beside.kinematic_viscosity, beside.conductivity, beside.prandtl))
    reynolds = LOWEST * (HIGHEST / LOWEST) ** random.random(runs)
    nusselt = TRUTH["C"] * reynolds ** TRUTH["n"] * prandtl ** (1 / 3)
    h_error = H_ERRORS[0] * (H_ERRORS[1] / H_ERRORS[0]) ** random.random(runs)
    spread = SCATTER * random.standard_normal(runs) + h_error * random.standard_normal(runs)
    speed = reynolds * nu / DIAMETER * np.exp(speed_error * random.standard_normal(runs))
    return Runs(speed, nusselt * k / DIAMETER * np.exp(spread), h_error)
