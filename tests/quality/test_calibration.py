"""Posteriors are calibrated: intervals cover as often as they say, ranks of truths are evenly spread."""

import json
import math
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from calibration_study import COVERED, FAMILIES, PRIORS
from scipy.stats import chi2, kstest, norm

from finback.parameters import DEFAULT_PRIORS
from finback.rig_file import LAWS, TIPS

STUDY = Path(__file__).with_name("calibration_study.py")
PROCESSES = 2
RIGS, SIMULATIONS = 2000, 400


def study(what: str, name: str, count: int) -> list[dict]:
    """Carry out a study, shared out over processes."""
    bounds = np.linspace(0, count, PROCESSES + 1).astype(int)
    shares = [[str(first), str(last)] for first, last in pairwise(bounds)]
    commands = [[sys.executable, str(STUDY), what, name, *share] for share in shares]
    running = [subprocess.Popen(command, stdout=subprocess.PIPE, text=True) for command in commands]
    return [row for process in running for row in json.loads(process.communicate()[0])]


def improbable(ranks: list[float]) -> float:
    """The smaller p-value of two tests that ranks are evenly spread.

    Kolmogorov's, which sees a shift, and the sum of squared normal scores, which sees a width (Cook, Gelman,
    Rubin, J. Comp. Graph. Stat. 15 (2006) 675).
    """
    scores = norm.ppf(np.clip(ranks, 1e-9, 1 - 1e-9))
    below = chi2.cdf(np.square(scores).sum(), len(ranks))
    return min(float(kstest(ranks, "uniform").pvalue), 2 * min(below, 1 - below))


@pytest.mark.slow
@pytest.mark.parametrize("name", COVERED)
def test_intervals_cover_a_fixed_truth(name: str) -> None:
    rows = study("cover", name, RIGS)
    assert len(rows) == RIGS
    for quantity in ("h", "k", "joint", "h_over_k"):
        true, low95, high95, low68, high68 = np.array([row[quantity] for row in rows]).T
        assert 0.935 <= np.mean((low95 <= true) & (true <= high95)) <= 0.965, quantity
        assert 0.65 <= np.mean((low68 <= true) & (true <= high68)) <= 0.71, quantity


@pytest.mark.slow
@pytest.mark.parametrize("name", FAMILIES)
def test_ranks_of_drawn_truths_are_evenly_spread(name: str) -> None:
    rows = study("rank", name, SIMULATIONS)
    assert len(rows) == SIMULATIONS
    for quantity in rows[0]:
        assert improbable([row[quantity] for row in rows]) > 1e-3, quantity


@pytest.mark.parametrize(
    ("factor", "shift", "right"),
    [(1.0, 0.0, True), (0.85, 0.0, False), (1.18, 0.0, False), (1.0, 0.3, False)],
)
def test_the_rank_tests_see_a_wrong_posterior(factor: float, shift: float, right: bool) -> None:
    # posteriors of a normal mean whose sd is wrong by a factor, or whose mean by a share of an sd
    truth, error = np.random.default_rng(1).standard_normal((2, SIMULATIONS))
    away = (truth - error) / 2 / (factor * math.sqrt(0.5)) + shift
    assert (improbable(norm.cdf(away).tolist()) > 1e-3) == right


def test_every_tip_law_and_parameter_is_in_a_family() -> None:
    assert {candidate.tip for _, candidate in FAMILIES.values()} == set(TIPS)
    assert {candidate.law for _, candidate in FAMILIES.values()} == set(LAWS)
    assert set(PRIORS) <= set(DEFAULT_PRIORS)
