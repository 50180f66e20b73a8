"""Fit synthetic repeats of an invented rig and print, as JSON, what each estimate says of the truth.

Run `python tests/quality/coverage_study.py bench 0 100` for the first hundred repeats of the bench rig. It is
a script of its own so that repeats can go over several processes. Every error that the rig states is drawn
anew for each repeat: noise, a calibration error for each place, hole positions, the diameter, the heat; and
the conductivity from what the rig states of it.
"""

import json
import sys
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "inverse"))

from rigs import ZERO, Truth, draw, pin_rig

import finback
from finback.quantity import Quantity

K = Quantity(167.0, 8.35)
RIGS = {
    "bench": pin_rig(diameter=Quantity(0.008, 2e-5), conductivity=K, tip="convective"),
    "rough": pin_rig(places=("air",), diameter=Quantity(0.008, 2.4e-4), conductivity=K, tip="convective"),
    "unstated-noise": pin_rig(noise=None, calibration=0.0, conductivity=K, tip="convective"),
}
"""The bench pin; a pin roughly turned, without plate and heat; one whose noise is estimated."""


def repeat(name: str, number: int) -> dict[str, list[float] | bool]:
    """Fit one repeat: truth, median, sd and 95 % interval of each quantity, and whether it has converged."""
    rig = RIGS[name]
    readings, truth = draw(rig, Truth(), np.random.default_rng([7, number]))
    estimate = finback.fit(rig, readings, seed=number)
    solution = truth.solve(rig, np.zeros(1))
    heat = float(solution.base_heat[0])
    true = {
        "h": truth.h,
        "k": truth.k,
        "joint": truth.joint,
        "h_over_k": truth.h / truth.k,
        "m": np.sqrt(4 * truth.h / truth.k / truth.lengths["diameter"]),
        "base_temperature": float(solution.base_temperature[0]) - ZERO,
        "heat": heat,
        "base_heat_flux": heat / (np.pi / 4 * truth.lengths["diameter"] ** 2),
    }
    found: dict[str, list[float] | bool] = {"converged": estimate.sampler.converged}
    for quantity, value in true.items():
        summary = {**estimate.parameters, **estimate.derived}[quantity]
        if summary.median is not None:
            found[quantity] = [value, summary.median, summary.sd, summary.low95, summary.high95]
    return found


if __name__ == "__main__":
    rig_name, first, last = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    json.dump([repeat(rig_name, number) for number in range(first, last)], sys.stdout)
