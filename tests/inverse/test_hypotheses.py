"""Hypotheses about wrong readings: their evidence against scipy, by densities and by quadrature."""

from dataclasses import replace

import numpy as np
import pytest
from rigs import Truth, draw, pin_rig
from scipy.integrate import quad
from scipy.stats import multivariate_normal, norm

from finback import densities, hypotheses, normals, optimum, posing
from finback.hypotheses import Base, Hypothesis, State
from finback.normals import Posed
from finback.problem import Candidate
from finback.quantity import Quantity
from finback.readings import Readings
from finback.suspects import Size, about

JOINT = Candidate("convective", True, True)
RIG = pin_rig(conductivity=Quantity(167.0, 8.35), tip="convective")


def read(seed: int = 1, **changes: float) -> Readings:
    """Readings of an invented pin, some of them changed by so many kelvin."""
    readings, _ = draw(RIG, Truth(), np.random.default_rng(seed))
    return Readings("r", {name: value + changes.get(name, 0.0) for name, value in readings.values.items()})


def weighed(readings: Readings) -> tuple[Base, list[Hypothesis]]:
    base = hypotheses.base(optimum.fit(posing.pose(RIG, readings, JOINT)))
    return base, sorted(hypotheses.weigh(base, [State()]), key=lambda each: -each.log_weight)


def what(hypothesis: Hypothesis) -> set[tuple[str, str | None]]:
    return {(suspect.kind, suspect.sensor) for suspect in hypothesis.suspects}


def test_sizes_of_faults_are_a_density_about_their_median() -> None:
    size = about(2.0, 2.2, positive=0.7)
    assert size.shares.sum() == pytest.approx(1.0)
    assert size.shares[size.means > 0].sum() == pytest.approx(0.7)
    upper = np.repeat(size.means[size.means > 0], 1)
    assert np.median(upper) == pytest.approx(2.0)
    assert size.scaled(-0.5).means == pytest.approx(-0.5 * size.means)
    assert (size.scaled(-0.5).sds > 0).all()


def test_the_evidence_of_a_linear_model_is_that_of_its_normal_density() -> None:
    # a block of hypotheses about temperatures alone is linear in plate and air once h, k and joint are known
    base, _ = weighed(read())
    problem, n = base.problem, len(base.problem.measured.values)
    mean, sd = hypotheses.beforehand(problem, State())
    sd = np.where(np.isin(problem.names, ["h", "k", "joint"]), 1e-9, sd)
    mean = np.where(sd == 1e-9, base.start, mean)
    covariance = base.covariances[0]
    posed = Posed(problem.measured.values[None], covariance[None], mean[None], sd[None], np.ones(1))
    found = normals.fit(problem, posed, base.start)
    slopes = (
        problem.predict(base.start + 1e-3 * np.eye(len(mean))) - problem.predict(base.start[None])
    ) / 1e-3
    centre = problem.predict(base.start[None])[0] + slopes.T @ (mean - base.start)
    marginal = covariance + slopes.T @ (np.square(sd)[:, None] * slopes)
    expected = multivariate_normal.logpdf(problem.measured.values, centre[:n], marginal[:n, :n])
    assert found.log_evidence[0] == pytest.approx(expected, abs=1e-3)


@pytest.mark.parametrize("changes", [{}, {"T4": 2.0}, {"T1": -2.0}])
def test_laplace_and_weighted_draws_of_the_exact_density_agree(changes: dict[str, float]) -> None:
    _, found = weighed(read(**changes))
    for each in found[:6]:
        drawn = densities.weigh(each, np.random.SeedSequence(1))
        tolerance = 0.5 if ("air", "TA") in what(each) else 0.05  # an air error has two sides
        assert drawn.hypothesis.log_weight == pytest.approx(each.log_weight, abs=tolerance)


def test_the_density_of_a_wrong_reading_averages_over_what_its_error_may_be() -> None:
    base, found = weighed(read(T4=2.0))
    best = found[0]
    assert what(best) == {("offset", "T4")}
    at = best.freed[0]
    covariance = base.covariances[0]
    z = best.mean
    residuals = best.values - base.problem.predict(z[None])[0, : len(best.values)]

    def likelihood(error: float) -> float:
        moved = residuals.copy()
        moved[at] -= error
        size = best.sizes[0]
        beforehand = size.shares @ norm.pdf(error, size.means, size.sds)
        return float(np.exp(multivariate_normal.logpdf(moved, cov=covariance)) * beforehand)

    whole = quad(likelihood, -10.0, 10.0, points=[0.0, 2.0], limit=200)[0]
    prior = norm.logpdf(z, best.means, best.sds).sum()
    assert densities.log_density(best)(z[None])[0] == pytest.approx(np.log(whole) + prior, abs=1e-4)


def test_two_wrong_readings_have_a_density_on_a_grid_of_sizes() -> None:
    told, seen = np.array([[0.5, -1.0]]), np.array([[0.04, 0.01], [0.01, 0.09]])
    sizes = [about(1.0, 1.5), about(2.0, 2.0)]
    expected = sum(
        a * b * multivariate_normal.pdf(told[0], [m, n], seen + np.diag([s**2, t**2]))
        for a, m, s in zip(sizes[0].shares, sizes[0].means, sizes[0].sds, strict=True)
        for b, n, t in zip(sizes[1].shares, sizes[1].means, sizes[1].sds, strict=True)
    )
    assert hypotheses.sizes_together(told, seen, sizes)[0] == pytest.approx(np.log(expected), abs=1e-10)


@pytest.mark.parametrize(
    ("changes", "wrong"),
    [
        ({}, set()),
        ({"T4": 10.0}, {("offset", "T4")}),
        ({"T6": -3.0, "T2": 2.0}, {("offset", "T6"), ("offset", "T2")}),
    ],
)
def test_what_is_wrong_is_the_likeliest(changes: dict[str, float], wrong: set[tuple[str, str]]) -> None:
    _, found = weighed(read(**changes))
    assert what(found[0]) in (
        wrong,
        {(k.replace("offset", "shift") if s == "T2" else k, s) for k, s in wrong},
    )


def test_a_freed_reading_tells_how_far_it_is_off() -> None:
    _, found = weighed(read(T4=5.0))
    assert found[0].errors[0] == pytest.approx(5.0, abs=4 * np.sqrt(found[0].error_spread[0, 0]))


def test_a_reading_that_no_other_tells_of_stays_finite() -> None:
    # without a plate sensor and with h unknown nothing but the air thermometer says how warm the air is
    rig = replace(pin_rig(places=("air",), holes=(0.005, 0.06)), tip="convective")
    readings, _ = draw(rig, Truth(joint=None), np.random.default_rng(1))
    posed = posing.pose(rig, readings, Candidate("convective", False, False))
    base = hypotheses.base(optimum.fit(posed))
    found = hypotheses.weigh(base, [State()])
    assert all(np.isfinite(each.log_weight) for each in found)
    assert all((np.linalg.eigvalsh(each.error_spread) > 0).all() for each in found if each.freed)


def test_no_size_is_lost_that_an_error_may_have() -> None:
    size = Size(np.array([0.5, 0.5]), np.array([1.0, -30.0]), np.array([0.5, 1.0]))
    near = densities.near(size, 1.2, 0.1)
    assert near.means.tolist() == [1.0]
    assert densities.near(size, 1e3, 0.1).means.tolist() == [1.0, -30.0]
