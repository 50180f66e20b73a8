"""A law's intervals cover Hilpert's constants as often as they say, and do not where errors of Re are
ignored."""

import math
from pathlib import Path

import numpy as np
import pytest
from hilpert_campaigns import RIG, TRUTH, draw

from finback.correlate import correlate
from finback.quantity import Quantity
from finback.run_points import Stated

CAMPAIGNS = 300
SPEED_ERROR = 0.15
"""Of a vane anemometer: the larger part of it at low speeds, here of all."""


def covered(tmp_path: Path, campaigns: int, runs: int, stated: bool) -> dict[str, float]:
    """Return in which share of campaigns the 95 % interval of each constant holds the truth."""
    errors = Stated(speed_sd=Quantity(SPEED_ERROR)) if stated else Stated()
    hits = dict.fromkeys(TRUTH, 0)
    for number in range(campaigns):
        table = draw([6, runs, number], runs, SPEED_ERROR).write(tmp_path / "results.csv")
        found = correlate(table, RIG, stated=errors, seed=number)
        assert found.form == "reynolds"
        assert len(found.runs) == runs
        for name, true in TRUTH.items():
            constant = found.constants[name]
            hits[name] += constant.low95 <= true <= constant.high95
    return {name: count / campaigns for name, count in hits.items()}


def within_three_standard_errors(share: float, campaigns: int) -> bool:
    """Tell whether a share of so many campaigns is that of 95 % intervals."""
    return abs(share - 0.95) <= 3 * math.sqrt(0.95 * 0.05 / campaigns)


@pytest.mark.slow
def test_intervals_cover_hilperts_constants_and_not_with_the_errors_of_re_ignored(tmp_path: Path) -> None:
    shares = covered(tmp_path, CAMPAIGNS, runs=200, stated=True)
    assert all(within_three_standard_errors(share, CAMPAIGNS) for share in shares.values()), shares
    ignored = covered(tmp_path, CAMPAIGNS, runs=200, stated=False)
    assert not any(within_three_standard_errors(share, CAMPAIGNS) for share in ignored.values()), ignored


@pytest.mark.slow
def test_intervals_of_short_campaigns_cover_hilperts_constants(tmp_path: Path) -> None:
    shares = covered(tmp_path, CAMPAIGNS, runs=30, stated=True)
    assert all(within_three_standard_errors(share, CAMPAIGNS) for share in shares.values()), shares


def test_the_error_in_the_exponent_is_what_its_standard_deviation_says(tmp_path: Path) -> None:
    campaigns = 25
    scores = []
    for number in range(campaigns):
        table = draw([61, number], 30, SPEED_ERROR).write(tmp_path / "results.csv")
        n = correlate(table, RIG, stated=Stated(speed_sd=Quantity(SPEED_ERROR)), seed=number).constants["n"]
        scores.append((n.mean - TRUTH["n"]) / n.sd)
    assert abs(np.mean(scores)) < 3 / math.sqrt(campaigns)
    assert 0.6 < np.std(scores) < 1.45  # three standard errors of a standard deviation of 25
