"""Intervals cover the truth of every profile and every surface law as often as they say."""

import json
import math
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from recovery_study import LAWS, PROFILES

from finback.rig_file import LAWS as EVERY_LAW
from finback.shapes import SHAPES

STUDY = Path(__file__).with_name("recovery_study.py")
RUNS, PROCESSES = 200, 2


def recovered(name: str) -> list[dict[str, list[float]]]:
    """Recover the runs of a study, shared out over processes."""
    bounds = np.linspace(0, RUNS, PROCESSES + 1).astype(int)
    commands = [[sys.executable, str(STUDY), name, str(first), str(last)] for first, last in pairwise(bounds)]
    running = [subprocess.Popen(command, stdout=subprocess.PIPE, text=True) for command in commands]
    return [row for process in running for row in json.loads(process.communicate()[0])]


def test_every_profile_and_every_law_is_studied() -> None:
    assert set(PROFILES) == set(SHAPES) | {"table"}
    assert {*LAWS, "uniform"} >= set(EVERY_LAW)


@pytest.mark.slow
@pytest.mark.parametrize("name", [*PROFILES, *LAWS])
def test_intervals_cover_the_truth(name: str) -> None:
    rows = recovered(name)
    assert len(rows) == RUNS
    tolerance = 3 * math.sqrt(0.95 * 0.05 / RUNS)  # three standard errors of a share
    for quantity in rows[0]:
        true, low, high = np.array([row[quantity] for row in rows]).T
        share = np.mean((low <= true) & (true <= high))
        assert share == pytest.approx(0.95, abs=tolerance), quantity
