"""Where no candidate is right, the answer still holds the truth; where one is, it hardly widens."""

import json
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

STUDY = Path(__file__).with_name("misfit_study.py")
PROCESSES, RIGS, VARYING = 2, 200, 600


def study(name: str, rigs: int) -> tuple[np.ndarray, np.ndarray]:
    """Truth and limits of h, with and without misfits, (rigs, 5); probability of a misfit (rigs,)."""
    bounds = np.linspace(0, rigs, PROCESSES + 1).astype(int)
    shares = [[str(first), str(last)] for first, last in pairwise(bounds)]
    commands = [[sys.executable, str(STUDY), name, *share] for share in shares]
    running = [subprocess.Popen(command, stdout=subprocess.PIPE, text=True) for command in commands]
    rows = [row for process in running for row in json.loads(process.communicate()[0])]
    return np.array([row["h"] for row in rows]), np.array([row["misfit"] for row in rows])


@pytest.mark.slow
def test_intervals_cover_the_mean_of_an_h_that_varies_along_the_fin() -> None:
    h, probability = study("varying", VARYING)
    true, low, high, low_without, high_without = h.T
    assert len(h) == VARYING
    assert np.mean((low <= true) & (true <= high)) >= 0.90
    assert (
        np.mean((low_without <= true) & (true <= high_without)) < 0.85
    )  # so that there is what to protect from
    assert np.mean(probability > 0.5) > 0.3


@pytest.mark.slow
def test_a_fin_as_described_is_hardly_less_certain() -> None:
    h, probability = study("ideal", RIGS)
    true, low, high, low_without, high_without = h.T
    assert len(h) == RIGS
    assert 0.92 <= np.mean((low <= true) & (true <= high)) <= 0.98
    assert np.mean((high - low) / (high_without - low_without)) < 1.15
    assert np.mean(probability > 0.5) <= 0.03  # false alarms
