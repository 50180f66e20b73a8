"""The least-squares optimum of a problem: found from anywhere, as scipy finds it, with the right noise."""

import math

import numpy as np
import pytest
import scipy.optimize
from rigs import TRUTH, ZERO, Truth, draw, exact_readings, pin_rig

from finback import optimum, posing
from finback.optimum import LeastSquares
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig

JOINTED = Candidate("convective", joint=True, joint_possible=True)
STATED_K = Quantity(167.0, 8.35)


def posed(rig: Rig, seed: int = 1, candidate: Candidate = JOINTED, truth: Truth = TRUTH) -> Problem:
    return posing.pose(rig, draw(rig, truth, np.random.default_rng(seed))[0], candidate)


def random_case(rng: np.random.Generator) -> tuple[Rig, Truth, Candidate]:
    """A pin of some size in some air, its tip and joint, three to eight thermocouples."""
    plate, air = rng.uniform(-50, 300, 2)
    tip = ("adiabatic", "convective", "fixed", "infinite")[rng.integers(4)]
    truth = Truth(
        h=10 ** rng.uniform(0.3, 3.3),
        k=10 ** rng.uniform(1.0, 2.6),
        joint=10 ** rng.uniform(-5.5, -3.0) if rng.random() < 0.5 else None,
        plate=ZERO + plate,
        air=ZERO + air + math.copysign(15.0, air - plate),
        tip=tip,
        tip_temperature=ZERO + rng.uniform(min(plate, air), max(plate, air)),
    )
    length = 10 ** rng.uniform(-1.6, -0.5)
    places = (("air", "heat", "plate"), ("air", "plate"), ("air", "heat"), ("heat",))[rng.integers(4)]
    rig = pin_rig(
        holes=tuple(np.sort(rng.uniform(0.02, 0.98, rng.integers(4, 9))) * length),
        places=places,
        length=length,
        diameter=10 ** rng.uniform(-2.7, -1.8),
        conductivity=Quantity(truth.k),
        position_sd=0.0,
    )
    return rig, truth, Candidate(tip, truth.joint is not None and "plate" in places, "plate" in places)


@pytest.mark.parametrize("seed", range(40))
def test_error_free_readings_are_met_from_wherever_the_fit_starts(seed: int) -> None:
    rig, truth, candidate = random_case(np.random.default_rng(seed))
    found = optimum.fit(posing.pose(rig, exact_readings(rig, truth), candidate))
    assert found.chi_square < 1e-3  # a thirtieth of a standard deviation in one reading
    if found.point.rank == found.problem.n_physical:
        sd = math.sqrt(found.point.covariance[0, 0])
        assert found.z[0] == pytest.approx(math.log(truth.h), abs=0.03 * sd)


def by_scipy(problem: Problem, sigma: float, start: np.ndarray) -> scipy.optimize.OptimizeResult:
    """The optimum of readings and stated values at one sigma, by scipy's solver from another start."""
    stated = [(i, p.prior) for i, p in enumerate(problem.parameters) if p.stated]

    def residuals(z: np.ndarray) -> np.ndarray:
        whole = np.append(z, np.zeros(len(problem.parameters) - problem.n_physical))
        whitened = problem.whitened(whole[None], sigma)[0][0]
        return np.append(whitened, [(z[i] - prior.mean) / prior.sd for i, prior in stated])

    tight = {"ftol": 1e-15, "xtol": 1e-15, "gtol": 1e-15}
    return scipy.optimize.least_squares(residuals, start, x_scale="jac", **tight)


RIGS = {
    "stated noise": pin_rig(conductivity=STATED_K),
    "positions and diameter": pin_rig(position_sd=1e-3, diameter=Quantity(0.008, 1e-4)),
    "estimated noise": pin_rig(noise=None, calibration=0.0, position_sd=0.0),
    "estimated noise, offsets": pin_rig(noise=None, calibration=0.3, conductivity=STATED_K),
}


@pytest.mark.parametrize("name", RIGS)
def test_the_optimum_is_scipys(name: str) -> None:
    found = optimum.fit(posed(RIGS[name]))
    physical = found.z[: found.problem.n_physical]
    expected = by_scipy(found.problem, found.sigma, physical + np.array([0.2, -0.1, 0.3, 0.5, -0.5]))
    sds = np.sqrt(np.diag(found.point.covariance))
    assert np.abs((physical - expected.x) / sds).max() < 1e-4
    np.testing.assert_allclose(
        found.point.covariance,
        np.linalg.inv(expected.jac.T @ expected.jac),
        rtol=1e-3,
        atol=1e-5 * sds.min() ** 2,
    )


def test_an_estimated_noise_is_the_residual_standard_deviation() -> None:
    rig = pin_rig(places=("air",), noise=None, calibration=0.0, position_sd=0.0, conductivity=Quantity(167.0))
    found = optimum.fit(posed(rig, candidate=Candidate("convective", False, False), truth=Truth(joint=None)))
    predicted = found.problem.predict(found.z[None])[0]
    residuals = found.problem.measured.values - predicted
    assert found.degrees_of_freedom == 9 - 3
    assert found.sigma == pytest.approx(math.sqrt(residuals @ residuals / 6), rel=1e-6)
    assert found.chi_square == pytest.approx(6.0, rel=1e-6)
    assert found.z[-1] == pytest.approx(math.log(found.sigma))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_beside_stated_errors_the_noise_is_what_they_leave(seed: int) -> None:
    found = optimum.fit(posed(RIGS["estimated noise, offsets"], seed))
    # 11 readings and the stated k, for 5 unknowns; the noise is where chi-square is what it should be
    assert found.degrees_of_freedom == 7
    assert found.chi_square == pytest.approx(7.0, rel=1e-6)
    assert 0.02 < found.sigma < 0.6


def test_readings_that_agree_better_than_stated_errors_leave_no_noise() -> None:
    rig = pin_rig(noise=None, calibration=0.3, position_sd=1e-3, conductivity=STATED_K)
    found = optimum.fit(posing.pose(rig, exact_readings(rig), JOINTED))
    assert found.sigma < 1e-5
    assert found.chi_square < 1.0


def test_degrees_of_freedom_count_readings_and_what_the_rig_states() -> None:
    def freedom(rig: Rig) -> int:
        return optimum.fit(posed(rig)).degrees_of_freedom

    assert freedom(pin_rig()) == 11 - 5
    assert freedom(pin_rig(conductivity=STATED_K)) == 11 + 1 - 5
    assert freedom(pin_rig(conductivity=Quantity(167.0))) == 11 - 4
    # without heat and k one combination is open, and costs no reading
    assert freedom(pin_rig(places=("plate", "air"))) == 10 - 4


def test_chi_square_is_that_of_the_readings_covariance() -> None:
    found = optimum.fit(posed(RIGS["stated noise"]))
    problem = found.problem
    residuals = problem.measured.values - problem.predict(found.z[None])[0]
    expected = residuals @ np.linalg.solve(problem.noise.covariance(0.0), residuals)
    k = problem.names.index("k")
    expected += ((found.z[k] - problem.prior_mean[k]) / problem.prior_sd[k]) ** 2
    assert found.chi_square == pytest.approx(expected, rel=1e-9)


def again(found: LeastSquares) -> LeastSquares:
    return optimum.fit(found.problem)


def test_the_noise_is_that_of_the_slopes_at_the_optimum() -> None:
    found = optimum.fit(posed(RIGS["positions and diameter"]))
    renewed = posing.linearise(found.problem, found.z)
    np.testing.assert_allclose(renewed.noise.covariance(0.0), found.problem.noise.covariance(0.0), rtol=0.02)
    sds = np.sqrt(np.diag(found.point.covariance))
    assert np.abs((again(found).z - found.z) / sds).max() < 0.01


@pytest.mark.parametrize("place", ["plate", "air"])
def test_several_sensors_of_a_place_are_averaged(place: str) -> None:
    from dataclasses import replace

    rig = pin_rig(conductivity=STATED_K, calibration=0.0, noise=0.2)
    name = {"plate": "TP", "air": "TA"}[place]
    second = replace(rig.sensors[name], name="X")
    rig = replace(rig, sensors={**rig.sensors, "X": second})
    exact = exact_readings(rig).values
    readings = Readings("r", {**exact, name: exact[name] + 0.1, "X": exact[name] - 0.1})
    found = optimum.fit(posing.pose(rig, readings, JOINTED))
    assert found.z[found.problem.names.index(place)] == pytest.approx(exact[name], abs=1e-6)


def test_a_first_thermocouple_at_the_guessed_air_temperature() -> None:
    # nothing reads the air; the guess for it is 20 degC, and so is the base
    rig = pin_rig(places=("heat",), holes=(0.0, 0.02, 0.04, 0.06, 0.09, 0.12), position_sd=0.0)
    truth = Truth(plate=ZERO + 20.0, joint=None, air=ZERO + 60.0)
    candidate = Candidate("convective", False, False)
    found = optimum.fit(posing.pose(rig, exact_readings(rig, truth), candidate))
    assert found.chi_square < 1e-6
