"""Intervals cover the truth as often as they say, over repeats with every stated error drawn anew."""

import json
import math
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from rigs import Truth, draw, pin_rig

from finback import optimum, posing
from finback.linear import LinearAnswers
from finback.problem import Candidate
from finback.quantity import Quantity
from finback.rig import Rig

STUDY = Path(__file__).with_name("coverage_study.py")
PROCESSES = 2


def study(name: str, repeats: int) -> list[dict[str, list[float] | bool]]:
    """Fit repeats of a rig of the study, shared out over processes."""
    bounds = np.linspace(0, repeats, PROCESSES + 1).astype(int)
    shares = [[name, str(first), str(last)] for first, last in pairwise(bounds)]
    commands = [[sys.executable, str(STUDY), *share] for share in shares]
    running = [subprocess.Popen(command, stdout=subprocess.PIPE, text=True) for command in commands]
    found = [json.loads(process.communicate()[0]) for process in running]
    return [row for rows in found for row in rows]


@pytest.mark.slow
@pytest.mark.parametrize(("name", "repeats"), [("bench", 200), ("unstated-noise", 100)])
def test_posterior_intervals_cover_the_truth(name: str, repeats: int) -> None:
    rows = study(name, repeats)
    assert len(rows) == repeats
    assert all(row["converged"] for row in rows)
    tolerance = 3 * math.sqrt(0.95 * 0.05 / repeats)  # three standard errors of a share
    for quantity in ("h", "k", "joint", "h_over_k", "base_temperature", "heat"):
        true, _, _, low, high = np.array([row[quantity] for row in rows]).T
        share = np.mean((low <= true) & (true <= high))
        assert share == pytest.approx(0.95, abs=tolerance), quantity


def scores(rig: Rig, repeats: int) -> dict[str, np.ndarray]:
    """Errors of least squares in its own standard errors, by quantity."""
    jointed = any(s.place == "plate" for s in rig.sensors.values())
    found: dict[str, list[float]] = {}
    for number in range(repeats):
        readings, truth = draw(rig, Truth(), np.random.default_rng([8, number]))
        point = optimum.fit(posing.pose(rig, readings, Candidate("convective", jointed, jointed)))
        answers = LinearAnswers(point)
        true = {"h": truth.h, "k": truth.k, "joint": truth.joint, "h_over_k": truth.h / truth.k}
        true["m"] = math.sqrt(4 * truth.h / truth.k / truth.lengths["diameter"])
        true["heat"] = float(truth.solve(rig, np.zeros(1)).base_heat[0])
        for quantity in true if jointed else true.keys() - {"joint"}:
            value, sd = answers.answer(quantity)
            assert value is not None
            found.setdefault(quantity, []).append((value - true[quantity]) / sd)
    return {quantity: np.array(z) for quantity, z in found.items()}


K = Quantity(167.0, 8.35)
RIGS = {
    "bench": pin_rig(diameter=Quantity(0.008, 2e-5), conductivity=K),
    "no plate": pin_rig(places=("air", "heat"), conductivity=K),
    "rough holes": pin_rig(position_sd=1e-3, conductivity=K),
    "large offsets": pin_rig(calibration=0.5, conductivity=K),
}


@pytest.mark.slow
@pytest.mark.parametrize("name", RIGS)
def test_standard_errors_of_least_squares_are_honest(name: str) -> None:
    for quantity, z in scores(RIGS[name], 1000).items():
        assert z.std() == pytest.approx(1.0, abs=0.08), quantity  # 3.6 standard errors of it
        assert abs(z.mean()) < 0.15, quantity
        assert np.mean(np.abs(z) < 1.96) == pytest.approx(0.95, abs=0.022), quantity


@pytest.mark.slow
def test_a_roughly_measured_diameter_widens_what_hangs_on_it() -> None:
    for quantity, z in scores(pin_rig(diameter=Quantity(0.008, 2.4e-4), conductivity=K), 1000).items():
        assert z.std() == pytest.approx(1.0, abs=0.08), quantity
