"""The error that is stated with an evidence is the error it has, or more, over many seeds."""

from collections.abc import Callable

import numpy as np
import pytest
from densities import LogDensity
from evidences import both, fin_problem, gauss_hermite, linear_gaussian

from finback.laplace import Mode

SEEDS = range(60)


def linear() -> tuple[LogDensity, Mode, float]:
    return linear_gaussian(1)


def fin() -> tuple[LogDensity, Mode, float]:
    problem, mode = fin_problem(noise=None)
    return problem.log_density, mode, gauss_hermite(problem.log_density, mode, 25)


@pytest.mark.slow
@pytest.mark.parametrize("pose", [linear, fin])
def test_stated_errors_are_honest(pose: Callable[[], tuple[LogDensity, Mode, float]]) -> None:
    log_density, mode, exact = pose()
    found = [both(log_density, mode, seed) for seed in SEEDS]
    scores = {
        name: np.array([(each[name].log - exact) / each[name].error for each in found])
        for name in ("bridge", "fast")
    }
    assert 0.6 < scores["bridge"].std(ddof=1) < 1.6
    assert abs(scores["bridge"].mean()) < 0.6  # four standard errors of the mean of sixty
    # what is stated of the fast route is the error of independent draws; those of a lattice have less
    assert np.abs(scores["fast"]).max() < 1.0
    assert 0.02 < scores["fast"].std(ddof=1) < 0.5
    assert abs(scores["fast"].mean()) < 0.5 * scores["fast"].std(ddof=1)
