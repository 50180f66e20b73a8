"""The evidence against exact values: analytic ones, and deterministic quadrature of a real fin problem."""

from functools import partial

import numpy as np
import pytest
from densities import (
    CORRELATED,
    SCALES,
    gaussian,
    log_gamma,
    log_gamma_mode,
)
from evidences import both, fin_problem, gauss_hermite, linear_gaussian

from finback.laplace import Mode


@pytest.mark.parametrize("seed", [1, 2])
def test_a_linear_model_with_normal_priors(seed: int) -> None:
    log_density, mode, exact = linear_gaussian(seed)
    for name, found in both(log_density, mode, seed).items():
        assert found.log == pytest.approx(exact, abs=0.02), name
        assert abs(found.log - exact) < 4 * found.error, name
        assert found.error < 0.02


def test_normalised_densities_have_no_evidence_to_add() -> None:
    shapes = np.array([0.7, 2.0, 9.0])
    mean, covariance = np.arange(6.0), CORRELATED * np.outer(SCALES, SCALES)
    for log_density, mode in (
        (log_gamma(shapes), log_gamma_mode(shapes)),
        (gaussian(mean, covariance), Mode(mean, 0.0, np.linalg.cholesky(covariance))),
    ):
        for name, found in both(log_density, mode).items():
            assert found.log == pytest.approx(0.0, abs=0.02), name


@pytest.mark.parametrize("noise", [0.15, None], ids=["stated", "estimated"])
def test_a_fin_against_quadrature(noise: float | None) -> None:
    problem, mode = fin_problem(noise)
    assert len(problem.names) == (3 if noise else 4)
    rule = partial(gauss_hermite, problem.log_density, mode)
    exact = rule(20)
    assert rule(25) == pytest.approx(exact, abs=1e-3)  # the rule itself has settled
    for name, found in both(problem.log_density, mode).items():
        assert found.log == pytest.approx(exact, abs=0.01 if name == "fast" else 0.02), name
        assert abs(found.log - exact) < 4 * found.error, name


def test_the_seed_alone_decides() -> None:
    log_density, mode, _ = linear_gaussian(3)
    first = both(log_density, mode, 4)
    assert first == both(log_density, mode, 4)
    assert first != both(log_density, mode, 5)
