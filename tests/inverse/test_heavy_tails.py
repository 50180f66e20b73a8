"""Heavy-tailed noise: its likelihood against scipy's, its evidence against quadrature, and a sensor far off.

scipy.stats.t is the independent check of the density; the grid evaluates the forward model directly, not
through `Problem`. Student's t with many degrees of freedom is the normal distribution, so that the errors
that are unknowns beside heavy tails must then give what a covariance gives.
"""

import json
import math
from dataclasses import replace
from functools import partial

import numpy as np
import pytest
from rigs import TRUTH, ZERO, Truth, draw, exact_readings, pin_rig
from scipy.integrate import simpson
from scipy.special import digamma, gammaln
from scipy.stats import multivariate_normal, norm, t

import finback
from finback import (
    budget,
    candidates,
    concerns,
    conclusions,
    evidence,
    fast,
    geometry,
    optimum,
    overview,
    posing,
    routes,
    sampling,
    summaries,
    tails,
)
from finback.models import BaseTemperature, ConvectiveTip, Fin, UniformCoefficient, pin, solve
from finback.parameters import SHARED_ERRORS
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.readings import Readings
from finback.report import files
from finback.rig import Rig, Sensor
from finback.sampling import Settings

K = Quantity(167.0, 8.35)
NORMAL = Candidate("convective", True, True)
HEAVY = replace(NORMAL, heavy_tails=True)
BOTH = ("normal", "heavy-tailed")
QUICK = Settings(block=50, max_steps=100)
NU = 4
OFF = 5.0  # K
FIVE = (0.005, 0.03, 0.055, 0.08, 0.105)  # m

weigh = partial(routes.weigh, seed=np.random.SeedSequence(1))


def quiet(_stage: str, _fraction: float) -> None:
    pass


def full_rig(**changes: object) -> Rig:
    """Noise, calibration, holes and a diameter that are not known."""
    return pin_rig(conductivity=K, tip="convective", diameter=Quantity(0.008, 8e-5), **changes)


def drawn(rig: Rig, seed: int = 1) -> Readings:
    return draw(rig, Truth(), np.random.default_rng(seed))[0]


def spoilt(readings: Readings, sensor: str = "T4", by: float = OFF) -> Readings:
    return Readings("spoilt", dict(readings.values) | {sensor: readings.values[sensor] + by})


def at(problem: Problem, seed: int = 0) -> np.ndarray:
    """A block of parameter vectors about the truth."""
    true = {"h": 45.0, "k": 167.0, "joint": 5e-5, "plate": ZERO + 80, "air": ZERO + 22, "noise": 0.2}
    true |= dict.fromkeys(SHARED_ERRORS, 0.5)
    z = [math.log(true[p.name]) if p.transform == "log" else true[p.name] for p in problem.parameters]
    return np.array(z) + 0.1 * np.random.default_rng(seed).standard_normal((20, len(z)))


def scales(problem: Problem, z: np.ndarray, sigma: float | None) -> np.ndarray:
    """Noise and hole of each fin sensor in quadrature, with dT/dx at z by differences of the model."""
    values = problem.values(z[None])
    x = problem.measured.positions
    up, down = (problem.solve(values, np.minimum(x + s * 1e-5, 0.12)).temperatures[0] for s in (1, -1))
    slope = (up - down) / (np.minimum(x + 1e-5, 0.12) - (x - 1e-5))
    return np.hypot(0.15 if sigma is None else sigma, slope * 0.3e-3)


def independently(problem: Problem, twin: Problem, z0: np.ndarray, row: np.ndarray, noise: float | None):
    """What a row's log likelihood should be: residuals and scales of the fin, residuals of the rest."""
    n_fin = len(problem.measured.positions)
    names = problem.names
    sigma = math.exp(row[-1]) if noise is None else None
    residuals = problem.measured.values - problem.predict(row[None])[0]
    residuals -= row[names.index("diameter_error")] * twin.by_lengths[:, 0]
    residuals[:n_fin] -= 0.1 * row[names.index("calibration")]
    rest = np.array([(0.15 if sigma is None else sigma) ** 2 + 0.1**2] * 2 + [0.0])
    rest[2] = (0.03 * problem.measured.values[-1]) ** 2
    return residuals, scales(problem, z0, sigma), rest


@pytest.mark.parametrize("noise", [0.15, None])
def test_likelihood_is_scipys(noise: float | None) -> None:
    rig = full_rig(noise=noise)
    problem = posing.pose(rig, spoilt(drawn(rig)), HEAVY)
    block = at(problem)
    z0 = block[0]
    own = [i for i, name in enumerate(problem.names) if name not in SHARED_ERRORS]
    twin = posing.linearise(posing.pose(rig, problem.readings, NORMAL), z0[own])
    problem = posing.linearise(problem, z0)
    n_fin = len(problem.measured.positions)
    for row, log, each in zip(block, problem.log_likelihood(block), problem.pointwise(block), strict=True):
        residuals, scale, rest = independently(problem, twin, z0, row, noise)
        of_fin = t.logpdf(residuals[:n_fin] / scale, NU) - np.log(scale)
        # neither plate nor air nor heat has a second sensor, so that they share no error
        of_rest = norm.logpdf(residuals[n_fin:], scale=np.sqrt(rest))
        assert log == pytest.approx(of_fin.sum() + of_rest.sum(), abs=1e-5)
        # given the errors that are shared no reading tells of another: leave-one-out is each one's density
        np.testing.assert_allclose(each, np.concatenate([of_fin, of_rest]), atol=1e-5)


def test_two_sensors_of_the_air_still_share_their_error() -> None:
    rig = full_rig()
    two = {**rig.sensors, "TA2": Sensor("TA2", "air", noise=0.3, calibration=0.1)}
    rig = replace(rig, sensors=two)
    readings = Readings("r", dict(drawn(rig).values))
    problem = posing.pose(rig, readings, HEAVY)
    row = at(problem)[:1]
    names = [s.name for s in problem.measured.sensors]
    one, other = names.index("TA"), names.index("TA2")
    covariance = np.full((2, 2), 0.1**2) + np.diag([0.15**2, 0.3**2])
    residuals = (problem.measured.values - problem.predict(row)[0])[[one, other]]
    mean = covariance[0, 1] / covariance[1, 1] * residuals[1]
    variance = covariance[0, 0] - covariance[0, 1] ** 2 / covariance[1, 1]
    found = problem.pointwise(row)[0]
    assert found[one] == pytest.approx(norm.logpdf(residuals[0], mean, math.sqrt(variance)), abs=1e-9)
    alone = sum(found[i] for i in range(len(names)) if i not in (one, other))
    joint = multivariate_normal.logpdf(residuals, np.zeros(2), covariance)
    assert problem.log_likelihood(row)[0] == pytest.approx(alone + joint, abs=1e-9)


def test_least_squares_and_likelihood_are_one() -> None:
    rig = full_rig(noise=None)
    problem = posing.pose(rig, spoilt(drawn(rig)), HEAVY)
    block = at(problem)
    whitened, log_variances = problem.whitened(block)
    constant = problem.log_likelihood(block) + 0.5 * (np.square(whitened).sum(axis=1) + log_variances)
    assert np.ptp(constant) < 1e-9


def test_bending_its_slope_and_its_information() -> None:
    residuals = np.array([-40.0, -2.0, -1e-9, 0.0, 0.3, 1.0, 3.0, 500.0])
    bent = tails.bend(residuals[None], len(residuals))[0]
    np.testing.assert_allclose(tails.unbend(bent), residuals, rtol=1e-9)
    constant = t.logpdf(0.0, NU)
    np.testing.assert_allclose(constant - 0.5 * bent**2, t.logpdf(residuals, NU), rtol=1e-12)
    assert constant - norm.logpdf(0.0) == pytest.approx(tails.LOG_HEIGHT, rel=1e-12)
    up, down = (tails.bend((residuals + s * 1e-6)[None], len(residuals))[0] for s in (1, -1))
    np.testing.assert_allclose(tails.steepness(bent), (up - down) / 2e-6, rtol=1e-5)
    # averaged over what they are drawn from: the information of the location, and ones in the scale's
    # equation (Lange, Little, Taylor, J. Am. Stat. Assoc. 84 (1989) 881, appendix B)
    even = t.ppf((np.arange(200_000) + 0.5) / 200_000, NU)
    bent = tails.bend(even[None], len(even))[0]
    assert np.mean(tails.widening(bent) ** -2) == pytest.approx((NU + 1) / (NU + 3), rel=1e-4)
    assert np.mean(tails.counted(tails.squares(bent, len(bent)), len(bent))) == pytest.approx(1.0, rel=1e-4)
    score = digamma((NU + 1) / 2) - digamma(NU / 2)
    assert np.mean(bent**2) == pytest.approx((NU + 1) * score, rel=1e-3)


@pytest.mark.parametrize("noise", [0.15, None])
def test_light_tails_are_normal_noise(noise: float | None, monkeypatch: pytest.MonkeyPatch) -> None:
    # errors that are unknowns must then make what they make in the covariance: evidence, means and widths
    many = 1e6
    monkeypatch.setattr(tails, "FREEDOM", many)
    height = gammaln((many + 1) / 2) - gammaln(many / 2) - 0.5 * math.log(many / 2)
    monkeypatch.setattr(tails, "LOG_HEIGHT", height)
    rig = full_rig(noise=noise)
    normal, heavy = (weigh(posing.pose(rig, drawn(rig), each)) for each in (NORMAL, HEAVY))
    assert set(heavy.point.problem.names) - set(normal.point.problem.names) == {
        "calibration",
        "diameter_error",
    }
    assert heavy.fast.evidence.log == pytest.approx(
        normal.fast.evidence.log, abs=0.02 if noise is None else 0.01
    )
    random = np.random.default_rng(1)
    values = [
        geometry.spread(one.point.problem, one.mode.z, one.fast.z, one.quantities, random)
        for one in (normal, heavy)
    ]
    for name in ("h", "k", "joint", "h_over_k", "heat"):
        mean, sd = (
            float(each) for each in (normal.fast.mean(values[0][name]), normal.fast.sd(values[0][name]))
        )
        assert float(heavy.fast.mean(values[1][name])) == pytest.approx(mean, abs=0.05 * sd), name
        assert float(heavy.fast.sd(values[1][name])) == pytest.approx(sd, rel=0.05), name


@pytest.fixture(scope="module", params=[OFF, 1.0])
def gridded(request: pytest.FixtureRequest) -> tuple[float, Problem, float, list[tuple[float, float]]]:
    """A fin with three unknowns and a reading so far off: problem, log evidence, mean and sd of each unknown.

    The unknowns are h, the base temperature and the calibration error; Simpson's rule on a grid.
    """
    rig = pin_rig(places=(), holes=FIVE, position_sd=0.0, conductivity=Quantity(167.0))
    rig = replace(rig, surroundings=replace(rig.surroundings, air=Quantity(TRUTH.air)))
    readings = spoilt(drawn(rig, 3), "T2", request.param)
    problem = posing.pose(rig, readings, Candidate("convective", False, False, heavy_tails=True))
    assert problem.names == ("h", "base_temperature", "calibration")
    mode = routes.find_mode(optimum.fit(problem))
    sds = np.sqrt(np.diag(mode.root @ mode.root.T))
    wide = np.array([25.0, 25.0, 8.0])  # the calibration error is standard normal whatever the readings
    axes = [np.linspace(z - w, z + w, 201) for z, w in zip(mode.z, wide * sds, strict=True)]
    axes[2] = axes[2][::4]
    h, base = (each.ravel() for each in np.meshgrid(axes[0], axes[1], indexing="ij"))
    fin = Fin(pin(length=0.12, diameter=0.008), 167.0, UniformCoefficient(np.exp(h)), ConvectiveTip())
    off = problem.measured.values - solve(fin, BaseTemperature(base), TRUTH.air, np.array(FIVE)).temperatures
    logs = np.stack([_log_t((off - 0.1 * u) / 0.15).sum(axis=1) for u in axes[2]], axis=1) - 5 * math.log(
        0.15
    )
    logs = logs.reshape([len(axis) for axis in axes])
    places = np.meshgrid(*axes, indexing="ij", sparse=True)
    for place, parameter in zip(places, problem.parameters, strict=True):
        logs = logs + norm.logpdf(place, parameter.prior.mean, parameter.prior.sd)
    density = np.exp(logs - logs.max())

    def integral(values: np.ndarray) -> float:
        for axis in reversed(axes):
            values = simpson(values, x=axis)
        return float(values)

    whole, moments = integral(density), []
    for place in places:
        mean = integral(density * place) / whole
        moments.append((mean, math.sqrt(integral(density * (place - mean) ** 2) / whole)))
    return request.param, problem, float(logs.max() + math.log(whole)), moments


def _log_t(residuals: np.ndarray) -> np.ndarray:
    """scipy's t.logpdf, which takes its time on millions of numbers, written out and held to it below."""
    constant = gammaln((NU + 1) / 2) - gammaln(NU / 2) - 0.5 * math.log(NU * math.pi)
    return constant - (NU + 1) / 2 * np.log1p(np.square(residuals) / NU)


def test_the_density_written_out_is_scipys() -> None:
    residuals = np.linspace(-40, 40, 81)
    np.testing.assert_allclose(_log_t(residuals), t.logpdf(residuals, NU), rtol=1e-12)


def test_evidence_and_posterior_against_quadrature(gridded: tuple) -> None:
    off, problem, exact, moments = gridded
    route = weigh(problem)
    chain = sampling.sample(
        problem.log_density,
        route.proposal,
        route.fast.efficiency,
        np.random.SeedSequence(2),
        Settings() if off == 1.0 else QUICK,
        lambda _: None,
    )
    bridged = evidence.bridge(problem.log_density, chain, np.random.SeedSequence(3))
    assert bridged.log == pytest.approx(exact, abs=0.02)
    weighed = route.fast.evidence
    assert weighed.log == pytest.approx(exact, abs=0.01 if off == OFF else 4 * weighed.error)
    z = chain.z.reshape(-1, 3)
    found = [(z.mean(axis=0), z.std(axis=0))]
    if off == OFF:
        found.append((route.fast.mean(route.fast.z), route.fast.sd(route.fast.z)))
    else:  # one of five that is less far off may be right, and the others wrong: weighted draws say so
        assert route.khat > fast.TRUSTED
    for means, sds in found:
        for (mean, sd), found_mean, found_sd in zip(moments, means, sds, strict=True):
            assert found_mean == pytest.approx(mean, abs=0.05 * sd)
            assert found_sd == pytest.approx(sd, rel=0.05)


@pytest.mark.parametrize("noise", [0.15, None])
@pytest.mark.parametrize("sensor", ["T1", "T4", "T8"])
def test_one_sensor_far_off_hardly_moves_h(noise: float | None, sensor: str) -> None:
    rig = full_rig(noise=noise)
    readings = drawn(rig)
    right = weigh(posing.pose(rig, readings, NORMAL))
    normal, heavy = (weigh(posing.pose(rig, spoilt(readings, sensor), each)) for each in (NORMAL, HEAVY))
    # 5 K are 33 times a stated noise: beyond any doubt; of a noise that nobody states they leave some
    assert heavy.log_weight - normal.log_weight > (80.0 if noise else 1.0)
    name = "h_over_k"
    before, with_normal, with_heavy = (
        float(route.fast.mean(route.quantities[name])) for route in (right, normal, heavy)
    )
    if noise:
        assert abs(with_normal / before - 1) > 0.014
        assert abs(with_heavy / before - 1) < 0.01
        assert abs(with_heavy - before) < 0.15 * abs(with_normal - before)
    else:
        sd = [float(route.fast.sd(route.quantities[name])) for route in (normal, heavy)]
        assert sd[1] < 0.5 * sd[0]
        assert abs(with_heavy / before - 1) < 0.015


def test_clean_readings_do_not_speak_for_heavy_tails() -> None:
    rig = full_rig()
    probabilities = []
    for seed in range(100, 130):
        readings = drawn(rig, seed)
        normal, heavy = (weigh(posing.pose(rig, readings, each)) for each in (NORMAL, HEAVY))
        probabilities.append(1 / (1 + math.exp(normal.log_weight - heavy.log_weight)))
    # beforehand it is 1/11; an average over what normal noise draws is below that
    assert np.mean(probabilities) < 1 / 11
    assert max(probabilities) < 0.5


def test_heavy_tails_come_beside_normal_noise_and_never_with_a_misfit() -> None:
    rig = replace(full_rig(), noise=BOTH)
    enumerated = [each.name for each in candidates.enumerate_candidates(rig)]
    plain = ["convective tip, joint", "convective tip, no joint"]
    assert enumerated == plain + [f"{name}, heavy-tailed noise" for name in plain]
    assert math.exp(HEAVY.log_prior) == pytest.approx(0.1)
    weighed = [each.point.problem.candidate for each in candidates.weigh(rig, drawn(rig), 1, quiet)]
    assert any(each.misfit for each in weighed)
    assert not [each for each in weighed if each.misfit and each.heavy_tails]
    alone = candidates.weigh(replace(rig, noise=BOTH[1:]), drawn(rig), 1, quiet)
    assert [each.point.problem.candidate.name for each in alone] == enumerated[2:]


@pytest.fixture(scope="module")
def estimate() -> finback.Estimate:
    rig = replace(full_rig(), noise=BOTH)
    return finback.fit(rig, spoilt(drawn(rig)), settings=QUICK)


def test_a_fit_names_the_sensor_and_goes_by_the_others(estimate: finback.Estimate) -> None:
    assert estimate.candidates[0].name == "convective tip, joint, heavy-tailed noise"
    (finding,) = [f for f in estimate.findings if f.code == "misfit"]
    assert finding.sensor == "T4"
    assert '"T4" lies far off and hardly counts' in finding.message
    assert estimate.comparison.startswith("The readings support the convective tip, joint (")
    assert "each with normal and with heavy-tailed noise along the fin" in estimate.compared
    assert estimate.fit.p_value is None
    h = estimate.parameters["h"]
    assert h.low95 < 45.0 < h.high95
    assert not set(SHARED_ERRORS) & {*estimate.parameters, *estimate.derived}
    assert any("common calibration error of the fin sensors" in line for line in estimate.priors)
    by_name = {row.sensor: row for row in estimate.table}
    assert by_name["T4"].residual == pytest.approx(OFF, abs=0.3)
    # the whole uncertainty of a reading, what is an unknown of its own included
    assert by_name["T8"].uncertainty > math.hypot(0.15, 0.1)


def test_the_reading_far_off_is_named_where_nothing_else_is_compared() -> None:
    for noise, readings, named in (
        (BOTH[1:], spoilt(drawn(full_rig())), True),
        (BOTH[1:], drawn(full_rig()), False),
        (BOTH, spoilt(drawn(full_rig())), True),
    ):
        outcome = weigh(posing.pose(replace(full_rig(), noise=noise), readings, HEAVY)).outcome()
        found = concerns.heavy_tails([outcome], [1.0])  # a run of many keeps those alone that have a part
        assert [f.sensor for f in found] == ["T4"] * named


def test_a_fit_with_heavy_tails_alone() -> None:
    estimate = finback.fit(replace(full_rig(), noise=BOTH[1:]), drawn(full_rig()), settings=QUICK)
    assert {each.name.rpartition(", ")[2] for each in estimate.candidates} == {"heavy-tailed noise"}
    assert "each with heavy-tailed noise along the fin" in estimate.compared
    assert "misfit" not in {finding.code for finding in estimate.findings}
    h = estimate.parameters["h"]
    assert h.low95 < 45.0 < h.high95


def test_a_fit_says_as_much_as_without_the_sensor(estimate: finback.Estimate) -> None:
    rig = full_rig()
    readings = drawn(rig)
    without = Readings("r", {name: v for name, v in readings.values.items() if name != "T4"})
    plain = weigh(posing.pose(rig, without, NORMAL))
    sd = float(plain.fast.sd(plain.quantities["h_over_k"]))
    found = estimate.derived["h_over_k"]
    assert found.mean == pytest.approx(float(plain.fast.mean(plain.quantities["h_over_k"])), abs=0.5 * sd)
    assert 0.9 * sd < found.sd < 1.5 * sd


def test_the_report_and_the_json_hold_it(estimate: finback.Estimate, tmp_path) -> None:
    files.write(estimate, tmp_path / "out")
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "heavy-tailed noise: the errors" in page
    assert "or with heavy tails" in page
    assert "no test, since readings with heavy tails" in page
    document = json.loads((tmp_path / "out" / "estimate.json").read_text(encoding="utf-8"))
    assert document["candidates"][0]["name"].endswith("heavy-tailed noise")
    assert document["fit"]["p_value"] is None
    assert not set(SHARED_ERRORS) & {*document["parameters"], *document["derived"]}


def test_check_tells_of_both() -> None:
    rig = replace(full_rig(), noise=BOTH)
    names = [each.name for each in candidates.enumerate_candidates(rig)]
    text = overview.describe(rig, None, names, candidates.why_compared(rig))
    assert "  convective tip, joint, heavy-tailed noise" in text.splitlines()
    assert "heavy-tailed noise along the fin" in " ".join(text.split())


def test_shares_of_the_budget_are_those_of_the_posterior() -> None:
    rig = full_rig(calibration=0.3)
    outcomes = [weigh(posing.pose(rig, drawn(rig), each)).outcome() for each in (NORMAL, HEAVY)]
    lines = {}
    for outcome in outcomes:
        linear = budget.linearise(outcome)
        variances = linear.variances()
        drawn_values = conclusions.quantities(outcome)
        for i, name in enumerate(linear.names):
            if name in ("h", "k", "h_over_k", "heat"):  # linear in what is uncertain here
                spread = float(drawn_values[name].std())
                assert math.sqrt(variances[:, i].sum()) == pytest.approx(spread, rel=0.12), name
        lines[outcome.problem.candidate] = {
            source.name: row / variances.sum(axis=0)
            for source, row in zip(linear.sources, variances, strict=True)
        }
        kinds = {source.name: source.kind for source in linear.sources}
        assert kinds["calibration of the fin sensors"] == kinds["diameter of the fin"] == "systematic"
    # the same sources under the same names, of much the same weight
    assert set(lines[NORMAL]) == set(lines[HEAVY])
    for source, shares in lines[NORMAL].items():
        np.testing.assert_allclose(lines[HEAVY][source], shares, atol=0.08, err_msg=source)


def test_an_improvement_is_judged_as_by_its_normal_twin() -> None:
    rig = full_rig(calibration=0.5)
    for improved in ("calibration of the fin sensors", "diameter of the fin", "hole positions"):
        left = []
        for each in (NORMAL, HEAVY):
            linear = budget.linearise(weigh(posing.pose(rig, drawn(rig), each)).outcome())
            column = linear.names.index("h_over_k")
            now, then = linear.variances()[:, column].sum(), linear.variances(improved)[:, column].sum()
            left.append(math.sqrt(then / now))
        assert left[0] < 0.99
        assert left[1] == pytest.approx(left[0], abs=0.04), improved


def test_what_is_determined_and_by_what() -> None:
    rig = full_rig()
    readings = drawn(rig)
    told = []
    for each in (NORMAL, HEAVY):
        outcome = weigh(posing.pose(rig, readings, each)).outcome()
        judge = summaries.judge(outcome)
        values = conclusions.quantities(outcome)
        told.append({name: judge.summarise(name, draws) for name, draws in values.items()})
    assert set(told[0]) == set(told[1])
    for name, normal in told[0].items():
        assert told[1][name].determined_by == normal.determined_by, name
        if normal.standard_error:
            assert told[1][name].standard_error == pytest.approx(normal.standard_error, rel=0.35), name


def test_an_estimated_scale_by_least_squares_is_not_carried_off() -> None:
    rig = full_rig(noise=None)
    exact = exact_readings(rig)
    random = np.random.default_rng(5)
    names = [s.name for s in rig.fin_sensors()]
    values = dict(exact.values) | {n: exact.values[n] + 0.15 * random.standard_normal() for n in names}
    clean, far = (optimum.fit(posing.pose(rig, Readings("r", v), HEAVY)) for v in (
        values, values | {"T4": values["T4"] + OFF},
    ))  # fmt: skip
    assert 0.05 < clean.sigma < 0.4
    assert far.sigma < 3 * clean.sigma


def test_without_shared_errors_there_are_no_more_unknowns() -> None:
    rig = pin_rig(calibration=0.0, position_sd=0.0, noise=None)
    problem = posing.pose(rig, drawn(rig), HEAVY)
    assert problem.shared is None
    assert problem.names == posing.pose(rig, drawn(rig), NORMAL).names
    assert optimum.fit(problem).point.converged
