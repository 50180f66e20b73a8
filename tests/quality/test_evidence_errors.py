"""The error that is stated with an evidence is the error it has, over many seeds."""

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
    for name in ("bridge", "fast"):
        scores = np.array([(each[name].log - exact) / each[name].error for each in found])
        assert 0.6 < scores.std(ddof=1) < 1.6, name
        assert abs(scores.mean()) < 0.6, name  # four standard errors of the mean of sixty
