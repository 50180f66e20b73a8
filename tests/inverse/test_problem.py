"""The likelihood of a problem against scipy's, with the covariance written out from the definition.

scipy.stats.multivariate_normal and norm.logcdf are the independent check; the covariance is assembled here
from random noise, one block a place, hole positions through dT/dx and lengths through their sensitivities.
"""

import math
from collections.abc import Callable

import numpy as np
import pytest
from rigs import HOLES, TRUTH, ZERO, Truth, exact_readings, pin_rig
from scipy.stats import multivariate_normal, norm

from finback import posing
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig, Sensor

JOINTED = Candidate("convective", joint=True, joint_possible=True)
PLAIN = Candidate("convective", joint=False, joint_possible=False)
SHIFT = 0.4  # K; readings away from the truth, so that every residual counts


def shifted(rig: Rig, truth: Truth = TRUTH) -> Readings:
    """Exact readings plus a zigzag that no noise explains."""
    exact = exact_readings(rig, truth).values
    signs = [(-1) ** i * SHIFT for i in range(len(exact))]
    return Readings("shifted", {name: v + s for (name, v), s in zip(exact.items(), signs, strict=True)})


def vector(problem: Problem, **changes: float) -> np.ndarray:
    """The true parameter vector of a problem, with values (SI units) changed by name."""
    values = {"h": 45.0, "k": 167.0, "joint": 5e-5, "plate": ZERO + 80, "air": ZERO + 22, "noise": 0.25}
    values |= {"base_temperature": ZERO + 75.4, "tip_temperature": ZERO + 30.0} | changes
    logs = [math.log(values[p.name]) if p.transform == "log" else values[p.name] for p in problem.parameters]
    return np.array(logs)


def predicted(problem: Problem, h: float = 45.0, **truth: float) -> np.ndarray:
    """What the forward model, called directly, says that the Gaussian sensors read."""
    values = exact_readings(problem.rig, Truth(h=h, **truth)).values
    return np.array([values[s.name] for s in problem.measured.sensors])


def common_error(sensor: Sensor, value: float) -> float:
    return sensor.calibration + (sensor.calibration_relative or 0.0) * value


def stated_covariance(problem: Problem, sigma: float) -> np.ndarray:
    """Random noise on the diagonal, one block a place: the definition, sensor by sensor."""
    sensors, values = problem.measured.sensors, problem.measured.values
    n = len(sensors)
    covariance = np.zeros((n, n))
    for i, a in enumerate(sensors):
        if a.noise is None and a.noise_relative is None:
            covariance[i, i] += sigma**2
        else:
            covariance[i, i] += (a.noise or 0.0) ** 2 + ((a.noise_relative or 0.0) * values[i]) ** 2
        for j, b in enumerate(sensors):
            if a.place == b.place:
                covariance[i, j] += common_error(a, values[i]) * common_error(b, values[j])
    return covariance


def mixed_rig() -> Rig:
    """Some sensors with stated noise, some without, two on the air, heat with a calibration of its own."""
    rig = pin_rig(noise=None, position_sd=0.0)
    sensors = dict(rig.sensors)
    sensors["T2"] = Sensor("T2", "fin", 0.02, noise=0.5, calibration=0.2)
    sensors["TA2"] = Sensor("TA2", "air", noise=0.3, calibration=0.1)
    sensors["Q"] = Sensor("Q", "heat", noise_relative=0.02, calibration_relative=0.01)
    return Rig("mixed", "pin", rig.geometry, sensors)


STATED = pin_rig(position_sd=0.0)
ESTIMATED = pin_rig(noise=None, position_sd=0.0, calibration=0.0)
BLOCKS = pin_rig(noise=None, position_sd=0.0, calibration=0.3)
RIGS = {"stated": STATED, "estimated": ESTIMATED, "blocks": BLOCKS, "mixed": mixed_rig()}


@pytest.mark.parametrize("rig", RIGS.values(), ids=RIGS)
@pytest.mark.parametrize("sigma", [0.05, 0.25, 3.0])
@pytest.mark.parametrize("h", [45.0, 60.0])
def test_log_likelihood_is_scipys(rig: Rig, sigma: float, h: float) -> None:
    problem = posing.pose(rig, shifted(rig), JOINTED)
    z = vector(problem, noise=sigma, h=h)
    covariance = stated_covariance(problem, sigma)
    expected = multivariate_normal.logpdf(problem.measured.values, predicted(problem, h), covariance)
    assert problem.log_likelihood(z[None])[0] == pytest.approx(expected, rel=1e-9, abs=1e-9)


def five_point(function: Callable[[float], np.ndarray], at: float, step: float) -> np.ndarray:
    """The derivative by the five-point formula, good to step**4."""
    f = [function(at + i * step) for i in (-2, -1, 1, 2)]
    return np.asarray((f[0] - 8 * f[1] + 8 * f[2] - f[3]) / (12 * step))


@pytest.mark.parametrize("noise", [0.15, None])
def test_positions_and_lengths_enter_through_their_slopes(noise: float | None) -> None:
    sd = 2e-4
    rig = pin_rig(noise=noise, position_sd=1e-3, diameter=Quantity(0.008, sd))
    problem = posing.pose(rig, shifted(rig), JOINTED)
    z = vector(problem)
    linear = posing.linearise(problem, z)
    n_fin = len(problem.measured.positions)

    def along(move: float) -> np.ndarray:
        return TRUTH.solve(rig, problem.measured.positions + move).temperatures[0]

    def thicker(diameter: float) -> np.ndarray:
        solution = Truth(lengths={"diameter": diameter}).solve(rig, problem.measured.positions)
        return np.array([*solution.temperatures[0], TRUTH.plate, TRUTH.air, solution.base_heat[0]])

    covariance = stated_covariance(problem, 0.25)
    slopes = five_point(along, 0.0, 1e-4)
    covariance[range(n_fin), range(n_fin)] += (slopes * 1e-3) ** 2
    sensitivity = five_point(thicker, 0.008, 1e-5) * sd
    covariance += np.outer(sensitivity, sensitivity)
    # differences with a step of 1e-4 are good to 1e-8
    np.testing.assert_allclose(linear.noise.covariance(0.25), covariance, rtol=1e-6, atol=1e-10)
    expected = multivariate_normal.logpdf(problem.measured.values, predicted(problem), covariance)
    assert linear.log_likelihood(z[None])[0] == pytest.approx(expected, abs=1e-5)
    own = linear.noise.covariance(0.25)
    exact = multivariate_normal.logpdf(problem.measured.values, predicted(problem), own)
    assert linear.log_likelihood(z[None])[0] == pytest.approx(exact, rel=1e-9)


def test_a_hole_at_an_end_has_a_slope_too() -> None:
    rig = pin_rig(holes=(0.0, 0.04, 0.12), position_sd=1e-3, noise=0.1, calibration=0.0)
    problem = posing.pose(rig, shifted(rig), JOINTED)
    linear = posing.linearise(problem, vector(problem))
    added = np.diag(linear.noise.covariance(0.0) - problem.noise.covariance(0.0))[:3]
    # at the base the heat is -k A dT/dx
    slope = exact_readings(rig).values["Q"] / (167 * np.pi / 4 * 0.008**2)
    assert added[0] == pytest.approx((slope * 1e-3) ** 2, rel=1e-3)
    tip_excess = TRUTH.solve(rig, np.array([0.12])).temperatures[0, 0] - TRUTH.air
    slope = 45 / 167 * tip_excess  # -k dT/dx = h theta at the tip
    assert added[2] == pytest.approx((slope * 1e-3) ** 2, rel=2e-2)


@pytest.mark.parametrize("power_over_heat", [0.8, 0.99, 1.0, 1.1, 3.0])
def test_a_heater_adds_the_log_probability_of_supplying_enough(power_over_heat: float) -> None:
    rig = pin_rig(places=("plate", "air", "heater"), position_sd=0.0)
    heat = exact_readings(rig).values["PH"]
    readings = exact_readings(rig, power=power_over_heat * heat)
    problem = posing.pose(rig, readings, JOINTED)
    z = vector(problem)
    power = readings.values["PH"]
    without = posing.pose(rig, Readings("r", readings.values, excluded={"PH": "left out"}), JOINTED)
    expected = norm.logcdf((power - heat) / (0.03 * power))
    added = problem.log_likelihood(z[None])[0] - without.log_likelihood(z[None])[0]
    assert added == pytest.approx(expected, rel=1e-9, abs=1e-9)


def test_a_heater_far_below_the_heat_stays_finite() -> None:
    rig = pin_rig(places=("plate", "air", "heater"), position_sd=0.0)
    problem = posing.pose(rig, exact_readings(rig, power=1e-3), JOINTED)
    z = np.array([vector(problem), vector(problem, h=1e4)])
    assert np.isfinite(problem.log_likelihood(z)).all()


@pytest.mark.parametrize("rig", RIGS.values(), ids=RIGS)
def test_whitened_residuals_and_log_likelihood_agree(rig: Rig) -> None:
    problem = posing.pose(rig, shifted(rig), JOINTED)
    z = np.array([vector(problem), vector(problem, h=30.0, noise=0.6)])
    whitened, log_variances = problem.whitened(z)
    n = len(problem.measured.values)
    constant = problem.noise.log_det + n * np.log(2 * np.pi)
    expected = -0.5 * (np.square(whitened).sum(axis=1) + log_variances + constant)
    np.testing.assert_allclose(problem.log_likelihood(z), expected, rtol=1e-12)


@pytest.mark.parametrize("rig", RIGS.values(), ids=RIGS)
def test_pointwise_is_the_conditional_density_of_each_reading(rig: Rig) -> None:
    problem = posing.pose(rig, shifted(rig), JOINTED)
    sigma = 0.25
    z = vector(problem, noise=sigma)
    covariance = stated_covariance(problem, sigma)
    mean, values = predicted(problem), problem.measured.values
    found = problem.pointwise(z[None])[0]
    for i in range(len(values)):
        rest = np.delete(np.arange(len(values)), i)
        weights = np.linalg.solve(covariance[np.ix_(rest, rest)], covariance[rest, i])
        centre = mean[i] + weights @ (values[rest] - mean[rest])
        variance = covariance[i, i] - weights @ covariance[rest, i]
        expected = norm.logpdf(values[i], centre, np.sqrt(variance))
        assert found[i] == pytest.approx(expected, rel=1e-8, abs=1e-8)


def test_log_prior_is_scipys() -> None:
    problem = posing.pose(BLOCKS, shifted(BLOCKS), JOINTED)
    z = vector(problem, h=20.0)
    priors = [p.prior for p in problem.parameters]
    expected = norm.logpdf(z, [p.mean for p in priors], [p.sd for p in priors]).sum()
    assert problem.log_prior(z[None])[0] == pytest.approx(expected, rel=1e-12)
    likelihood = problem.log_likelihood(z[None])[0]
    assert problem.log_density(z[None])[0] == pytest.approx(expected + likelihood, rel=1e-12)


def test_what_is_not_a_number_has_no_density() -> None:
    problem = posing.pose(BLOCKS, shifted(BLOCKS), JOINTED)
    z = vector(problem)
    block = np.array([z, np.full_like(z, np.nan), z])
    found = problem.log_density(block)
    assert found[1] == -np.inf
    alone = problem.log_density(z[None])[0]
    np.testing.assert_allclose(found[[0, 2]], alone, rtol=1e-12)


def test_predictions_are_those_of_the_forward_model_for_every_kind_of_base_and_tip() -> None:
    for tip in ("adiabatic", "convective", "fixed", "infinite"):
        for joint in (5e-5, None):
            truth = Truth(tip=tip, joint=joint)
            candidate = Candidate(tip, joint is not None, joint_possible=True)
            problem = posing.pose(STATED, shifted(STATED, truth), candidate)
            found = problem.predict(np.array([vector(problem)]))[0]
            read = exact_readings(STATED, truth).values
            expected = [read[s.name] for s in problem.measured.sensors]
            np.testing.assert_allclose(found, expected, rtol=1e-12)


def test_an_exactly_known_air_is_fixed_and_no_reading() -> None:
    rig = pin_rig(places=(), position_sd=0.0)
    rig = Rig("exact air", "pin", rig.geometry, {**rig.sensors, "TA": Sensor("TA", "air", noise=0.0)})
    problem = posing.pose(rig, exact_readings(rig), PLAIN)
    assert problem.fixed == {"air": TRUTH.air}
    assert "air" not in problem.names
    assert all(s.place == "fin" for s in problem.measured.sensors)


def test_an_excluded_reading_does_not_count() -> None:
    readings = shifted(STATED)
    without = Readings("r", {n: v for n, v in readings.values.items() if n != "T3"})
    excluded = Readings("r", readings.values, excluded={"T3": "loose"})
    problems = [posing.pose(STATED, each, JOINTED) for each in (without, excluded)]
    z = vector(problems[0])
    assert problems[0].log_likelihood(z[None])[0] == problems[1].log_likelihood(z[None])[0]
    assert "T3" not in {s.name for s in problems[1].measured.sensors}


def test_the_names_of_the_unknowns_follow_what_is_read_and_stated() -> None:
    exact = exact_readings(STATED)
    assert posing.pose(STATED, exact, JOINTED).names == ("h", "k", "joint", "plate", "air")
    bare = pin_rig(places=(), noise=None, conductivity=Quantity(167.0))
    problem = posing.pose(bare, exact_readings(bare), PLAIN)
    assert problem.names == ("h", "base_temperature", "air", "noise")
    assert problem.fixed == {"k": 167.0}
    held = Candidate("fixed", joint=False, joint_possible=False)
    assert "tip_temperature" in posing.pose(bare, exact_readings(bare), held).names
    assert tuple(problem.measured.positions) == HOLES
