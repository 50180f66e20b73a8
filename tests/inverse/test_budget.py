"""The uncertainty budget: shares that add up, against other algebra, posteriors and sources switched off."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
from fits import dataset
from rigs import HOLES, TRUTH, Truth, exact_readings, pin_rig

import finback
from finback import budget, derived, geometry, laplace, posing, routes
from finback.budget import Linear, Source
from finback.datasets import path
from finback.estimate import Summary
from finback.problem import Candidate, Problem
from finback.quantity import Quantity
from finback.routes import Outcome
from finback.sampling import Settings

ALL_ERRORS = {
    "conductivity": Quantity(167.0, 5.0),
    "diameter": Quantity(0.008, 8e-5),
    "position_sd": 0.8e-3,
    "calibration": 0.2,
    "tip": "convective",
}


def fitted(joint: bool = True, truth: Truth = TRUTH, **rig_fields: object) -> Outcome:
    """As much of an outcome as a budget looks at, of exact readings."""
    rig = pin_rig(**(ALL_ERRORS | rig_fields))
    problem = posing.pose(rig, exact_readings(rig, truth), Candidate("convective", joint, True))
    route = routes.weigh(problem, np.random.SeedSequence(1))
    return of_route(route)


def of_route(route: routes.Route) -> Outcome:
    return SimpleNamespace(  # type: ignore[return-value]  # the rest of an outcome needs a chain
        problem=route.point.problem, point=route.point, mode=route.mode, draws=route.fast.z[None]
    )


@pytest.fixture(scope="module")
def pin() -> Outcome:
    return fitted()


def shares(outcome: Outcome, name: str) -> dict[str, float]:
    linear = budget.linearise(outcome)
    variances = linear.variances()[:, linear.names.index(name)]
    return {s.name: float(v) for s, v in zip(linear.sources, variances / variances.sum(), strict=True)}


def invent(seed: int) -> Linear:
    """A linear problem of random numbers: two kinds of error, two lengths, known parameters, a bound."""
    rng = np.random.default_rng(seed)
    n, p, q = 9, 4, 3
    none, no_rows = np.zeros((n, 0)), np.zeros((0, p))
    errors = [np.diag(rng.uniform(0.2, 1.0, n)), rng.normal(size=(n, 1))]
    lengths = [(rng.normal(size=(n, 1)), rng.normal(size=(1, q))) for _ in range(2)]
    known = np.diag(rng.uniform(0.1, 2.0, p))
    return Linear(
        ("a", "b", "c"),
        np.zeros(q),
        rng.normal(size=(p, q)),
        rng.normal(size=(n, p)),
        (
            Source("noise", "random", errors[0], np.zeros((n, q)), no_rows),
            Source("offset", "systematic", errors[1], np.zeros((1, q)), no_rows),
            *(Source(f"length {i}", "systematic", *each, no_rows) for i, each in enumerate(lengths)),
            Source("stated", "prior", none, np.zeros((0, q)), known[:2]),
            Source("wide", "prior", none, np.zeros((0, q)), known[2:]),
            Source("bound", "systematic", none, np.zeros((0, q)), rng.normal(size=(1, p))),
        ),
    )


@pytest.mark.parametrize("seed", range(5))
def test_the_shares_are_those_of_least_squares_with_the_lengths_as_unknowns(seed: int) -> None:
    """Lengths as further unknowns with a prior of one: generalised least squares, Aitken (1935)."""
    linear = invent(seed)
    by_name = {source.name: source for source in linear.sources}
    errors, lengths = (by_name["noise"], by_name["offset"]), (by_name["length 0"], by_name["length 1"])
    of_errors = [source.effect @ source.effect.T for source in errors]
    jacobian = np.concatenate([linear.jacobian, *(s.effect for s in lengths)], axis=1)
    gradients = np.concatenate([linear.gradients, *(s.slope for s in lengths)])
    rows = [by_name[name].rows for name in ("stated", "wide", "bound")]
    p = linear.jacobian.shape[1]
    own = np.eye(p + 2)[p:]
    rows = [np.concatenate([each, np.zeros((len(each), 2))], axis=1) for each in rows]
    precision = np.linalg.inv(sum(of_errors))
    information = jacobian.T @ precision @ jacobian + sum(r.T @ r for r in (*rows, own))
    covariance = np.linalg.inv(information)
    gain = precision @ jacobian @ covariance @ gradients
    found = linear.variances()
    expected = [np.einsum("iq,ij,jq->q", gain, each, gain) for each in of_errors]
    expected += [np.square(row @ covariance @ gradients) for row in own]
    expected += [np.square(row @ covariance @ gradients).sum(axis=0) for row in rows]
    np.testing.assert_allclose(found, expected, rtol=1e-9)
    whole = np.einsum("iq,ij,jq->q", gradients, covariance, gradients)
    np.testing.assert_allclose(found.sum(axis=0), whole, rtol=1e-9)


def test_the_covariance_by_source_is_the_one_that_the_fit_used(pin: Outcome) -> None:
    problem = pin.problem
    found = sum(s.effect @ s.effect.T for s in posing.error_sources(problem, pin.point.z, 0.0))
    found = found + problem.by_lengths @ problem.by_lengths.T
    np.testing.assert_allclose(found, problem.noise.covariance(0.0), rtol=1e-5)


@pytest.mark.parametrize("joint", [True, False])
def test_the_variance_is_that_of_the_posterior(joint: bool) -> None:
    """Curvature of the log density by differences, which knows nothing of sources; and the weighted draws."""
    rig = pin_rig(**(ALL_ERRORS | {"diameter": 0.008}))
    truth = TRUTH if joint else replace(TRUTH, joint=None)  # residuals would bend the log density
    problem = posing.pose(rig, exact_readings(rig, truth), Candidate("convective", joint, True))
    route = routes.weigh(problem, np.random.SeedSequence(1))
    outcome = SimpleNamespace(problem=route.point.problem, point=route.point, mode=route.mode)
    linear = budget.linearise(outcome)  # type: ignore[arg-type]  # as much of an outcome as is looked at
    found = linear.variances().sum(axis=0)
    by_curvature = np.square(route.mode.root.T @ linear.gradients).sum(axis=0)
    determined = [linear.names.index(name) for name in ("h", "k", "h_over_k", "heat", "air")]
    np.testing.assert_allclose(found[determined], by_curvature[determined], rtol=0.02)
    for name in ("h", "h_over_k", "heat"):
        spread = float(route.fast.sd(route.quantities[name]))
        assert np.sqrt(found[linear.names.index(name)]) == pytest.approx(spread, rel=0.03)


def test_an_uncertain_length_moves_heat_by_what_it_is_itself() -> None:
    """The variance of heat with draws of the diameter added by `geometry`, another way to the same."""
    pin = fitted(diameter=Quantity(0.008, 3e-4), places=("plate", "air"))
    linear, rng = budget.linearise(pin), np.random.default_rng(2)
    z = pin.mode.z + rng.standard_normal((20_000, len(pin.mode.z))) @ pin.mode.root.T
    values = geometry.spread(pin.problem, pin.mode.z, z, derived.evaluate(pin.problem, z), rng)
    for name in ("heat", "h", "m"):
        found = linear.variances().sum(axis=0)[linear.names.index(name)]
        assert np.sqrt(found) == pytest.approx(values[name].std(), rel=0.03)
    assert shares(pin, "heat")["diameter of the fin"] > 0.3


ONE_AT_A_TIME = ("noise", "calibration", "position", "diameter", "k")


class Bench:
    """Draws of the errors of a rig, and what the posterior's mode makes of each.

    The estimator is the one that the errors together call for; sources are switched off in what it is given.
    Predictions come from the forward model with the lengths and holes as they are, not linearised.
    """

    def __init__(self, count: int) -> None:
        self.outcome = fitted()
        self.problem: Problem = self.outcome.problem
        self.rig = self.problem.rig
        self.sensors = self.problem.measured.sensors
        drawn = np.random.default_rng(3).standard_normal((count, 3 * len(self.sensors) + 2))
        # means of 0, variances of 1, no correlation, as the population has: less to average out
        self.normal = np.linalg.qr(drawn - drawn.mean(axis=0))[0] * np.sqrt(count)

    def errors(self, off: str) -> dict[str, np.ndarray]:
        """The errors of the quantities (count,) with one source switched off, "" for none."""
        found: dict[str, list[float]] = {}
        for u in self.normal:
            for name, value in self.error(u, off).items():
                found.setdefault(name, []).append(value)
        return {name: np.array(values) for name, values in found.items()}

    def error(self, u: np.ndarray, off: str) -> dict[str, float]:
        n = len(self.sensors)
        on = {source: float(source != off) for source in ONE_AT_A_TIME}
        lengths = {"diameter": 0.008 + on["diameter"] * 8e-5 * u[-1]}
        k = 167.0 * np.exp(on["k"] * np.sqrt(np.log1p((5 / 167) ** 2)) * u[-2])
        truth = replace(TRUTH, lengths=lengths, k=k)
        moved = [
            s.position + on["position"] * s.position_sd * u[2 * n + i] if s.place == "fin" else None
            for i, s in enumerate(self.sensors)
        ]
        rig = replace(
            self.rig,
            sensors={s.name: replace(s, position=x) for s, x in zip(self.sensors, moved, strict=True)},
        )
        exact = exact_readings(rig, truth).values
        values = np.array([exact[s.name] for s in self.sensors])
        first = {s.place: n + i for i, s in reversed([*enumerate(self.sensors)])}
        for i, sensor in enumerate(self.sensors):
            own = (sensor.noise_relative or 0.0) * abs(values[i]) + (sensor.noise or 0.0)
            values[i] += on["noise"] * own * u[i]
            values[i] += on["calibration"] * sensor.calibration * u[first[sensor.place]]
        posed = replace(self.problem, measured=replace(self.problem.measured, values=values))
        mode = laplace.find_mode(posed.log_density, self.outcome.mode.z, self.outcome.mode.root)
        found = self.with_lengths(posed, mode.z)
        true = derived.evaluate(posed, self.true_z(truth)[None], lengths)
        return {name: found[name] - float(true[name][0]) for name in ("h", "k", "h_over_k", "heat", "joint")}

    def with_lengths(self, posed: Problem, z: np.ndarray) -> dict[str, float]:
        """The quantities at z, moved by what the residuals say of the diameter."""
        found = {name: float(values[0]) for name, values in derived.evaluate(posed, z[None]).items()}
        residuals = posed.measured.values - posed.predict(z[None])[0]
        delta = posed.by_lengths.T @ np.linalg.solve(posed.noise.covariance(0.0), residuals)
        slopes = geometry.slopes(posed, self.outcome.mode.z)
        return {name: value + float(slopes.get(name, 0.0 * delta) @ delta) for name, value in found.items()}

    def true_z(self, truth: Truth) -> np.ndarray:
        values = {"h": truth.h, "k": truth.k, "joint": truth.joint, "plate": truth.plate, "air": truth.air}
        logs = {"h", "k", "joint"}
        return np.array(
            [np.log(values[name]) if name in logs else values[name] for name in self.problem.names]
        )


def test_the_shares_are_what_switching_each_source_off_takes_away() -> None:
    bench = Bench(128)
    everything = bench.errors("")
    for source, words in zip(
        ONE_AT_A_TIME,
        ("noise of", "calibration of", "hole positions", "diameter", "conductivity k, as stated"),
        strict=True,
    ):
        without = bench.errors(source)
        for name, errors in everything.items():
            taken_away = 1 - np.square(without[name]).mean() / np.square(errors).mean()
            told = sum(share for line, share in shares(bench.outcome, name).items() if line.startswith(words))
            assert told == pytest.approx(taken_away, abs=0.02), (source, name)


ESTIMATES = ("bench-pin", "aluminium-rod", "copper-pin")


@pytest.mark.parametrize("name", ESTIMATES)
def test_the_shares_of_every_quantity_add_up_to_one(name: str) -> None:
    estimate = dataset(name)
    quantities = {**estimate.parameters, **estimate.derived}
    told = {each for line in estimate.budget for each in line.share_of_variance}
    uncertain = {n for n, s in quantities.items() if s.median is not None and s.sd and n != "noise"}
    assert told == uncertain == set(estimate.expanded)
    for each in told:
        parts = [line.share_of_variance[each] for line in estimate.budget if each in line.share_of_variance]
        assert sum(parts) == pytest.approx(1.0, abs=1e-9)
        assert min(parts) >= 0.0
    first = [line.share_of_variance["h"] for line in estimate.budget]
    assert first == sorted(first, reverse=True)


def test_candidates_that_differ_are_a_source_of_their_own() -> None:
    estimate = dataset("bench-pin")
    draws, which = estimate.draws, estimate.draws.candidate
    ratio = draws.values[..., draws.names.index("h_over_k")]
    weights = np.array([c.probability for c in estimate.candidates])
    seen = [i for i, w in enumerate(weights) if w > 0.005]
    means = np.array([ratio[which == i].mean() for i in seen])
    within = np.array([ratio[which == i].var() for i in seen])
    weights = weights[seen] / weights[seen].sum()
    between = weights @ np.square(means - weights @ means)
    line = next(line for line in estimate.budget if line.source == budget.CANDIDATES)
    assert line.share_of_variance["h_over_k"] == pytest.approx(
        between / (between + weights @ within), abs=0.03
    )
    assert line.kind == "systematic"
    rig = pin_rig(holes=HOLES[::2], places=("air", "heat"), tip="convective")
    alone = finback.fit(rig, exact_readings(rig, Truth(joint=None)), settings=Settings(max_steps=100))
    assert len(alone.candidates) == 1
    assert not any(line.source == budget.CANDIDATES for line in alone.budget)


def test_an_estimated_noise_is_the_whole_budget_of_a_rig_that_states_nothing_else() -> None:
    lines = dataset("aluminium-rod").budget
    assert {line.kind for line in lines if line.source == "noise of the fin sensors"} == {"random"}
    folder = path("aluminium-rod")
    rig = finback.read_rig(folder / "rig.toml")
    readings = finback.read_readings(folder / "readings.csv", rig).pick(None)
    route = routes.weigh(
        posing.pose(rig, readings, Candidate("convective", False, False)), np.random.SeedSequence(1)
    )
    assert shares(of_route(route), "h")["noise of the fin sensors"] > 0.999


def improvement(**rig_fields: object) -> budget.Improvement:
    """What would help h most, of one candidate."""
    outcome = fitted(**rig_fields)
    average = budget._Average(
        "h", [budget._part(1.0, outcome, derived.evaluate(outcome.problem, outcome.draws[0]))]
    )
    found = budget._improvement({"h": average})
    assert found is not None
    return found


def test_an_improvement_is_what_a_better_rig_gives() -> None:
    """The same rig with holes known to 0.2 mm, by the curvature of its own posterior."""
    rough = {"position_sd": 3e-3, "heat_noise": 0.002, "conductivity": None, "diameter": 0.008}
    found = improvement(**rough)
    assert found.change == "hole positions known to 0.2 mm"
    sds = []
    for position_sd in (3e-3, 0.2e-3):
        outcome = fitted(**(rough | {"position_sd": position_sd}))
        linear = budget.linearise(outcome)
        sds.append(np.linalg.norm(outcome.mode.root.T @ linear.gradients[:, linear.names.index("h")]))
    assert found.sd_ratio == pytest.approx(sds[1] / sds[0], rel=0.01)


@pytest.mark.parametrize(
    ("rig_fields", "change"),
    [
        ({"heat_noise": 0.2, "conductivity": None}, "the heat reading known twice as well"),
        (
            {"conductivity": Quantity(167.0, 30.0), "places": ("plate", "air")},
            "the conductivity k known twice as well",
        ),
        (
            {"diameter": Quantity(0.008, 8e-4), "heat_noise": 1e-3, "conductivity": None},
            "the diameter of the fin known twice as well",
        ),
        ({"noise": 1.5, "heat_noise": 1e-3}, "the noise of the air sensor halved by averaging"),
        ({"places": ("plate", "heat")}, "the air read to 0.5 K"),
    ],
)
def test_what_helps_most_goes_by_the_largest_error(rig_fields: dict[str, object], change: str) -> None:
    assert improvement(**rig_fields).change == change


@pytest.mark.parametrize(("sources", "ratio"), [(6, None), (2, np.sqrt(1.25 / 2))])
def test_nothing_is_told_where_nothing_helps_much(sources: int, ratio: float | None) -> None:
    """One reading with errors of equal weight: halving one of six takes a sixteenth off the deviation."""
    one = Source("", "systematic", np.ones((1, 1)), np.zeros((1, 1)), np.zeros((0, 1)), "halved")
    better = replace(one, effect=0.5 * one.effect)
    even = tuple(replace(one, name=str(i), better=replace(better, name=str(i))) for i in range(sources))
    linear = Linear(("h",), np.zeros(1), np.ones((1, 1)), np.ones((1, 1)), even)
    part = budget._Part(1.0, linear, linear.variances(), {"h": 0.0}, {"h": 1.0})
    found = budget._improvement({"h": budget._Average("h", [part])})
    assert (found and found.sd_ratio) == (ratio and pytest.approx(ratio))


H = Summary("h", "convection coefficient h", "W/(m^2 K)", 41.2, 41.3, 0.9, 39.6, 43.1, 41.0, 0.95, "readings")


@pytest.mark.parametrize(
    ("value", "expanded", "linear"),
    [
        (41.3, 1.8, True),
        (41.3, 1.46, False),  # 17 % less than half the interval
        (41.3, 2.05, False),
        (40.8, 1.75, False),  # the interval reaches 1.2 down and 2.3 up
    ],
)
def test_the_linear_uncertainty_is_held_against_the_interval(
    value: float, expanded: float, linear: bool
) -> None:
    assert budget.is_linear(value, expanded, H) is linear


def test_value_and_expanded_uncertainty_are_those_of_the_posterior_where_it_is_normal() -> None:
    folder = path("bench-pin")
    rig = finback.read_rig(folder / "rig.toml")
    readings = finback.read_readings(folder / "readings.csv", rig).pick(None)
    few = {name: value for name, value in readings.values.items() if name not in ("T2", "T4", "T6", "T7")}
    estimate = finback.fit(rig, replace(readings, values=few))  # too few for a misfit, whose share is skewed
    for name in ("h", "k", "joint", "air", "heat"):
        told, summary = estimate.expanded[name], {**estimate.parameters, **estimate.derived}[name]
        assert told.linear
        assert told.value == pytest.approx(summary.mean, abs=0.05 * summary.sd)
        assert told.expanded == pytest.approx(2 * summary.sd, rel=0.05)


def test_where_the_posterior_is_bent_the_linear_one_says_so() -> None:
    rig = pin_rig(places=("plate", "air"), conductivity=Quantity(167.0, 45.0), tip="convective")
    estimate = finback.fit(rig, exact_readings(rig), seed=1)  # h is as log-normal as k
    assert not estimate.expanded["h"].linear
    assert estimate.expanded["h_over_k"].linear
    assert estimate.improvement is not None
    assert estimate.improvement.change == "the conductivity k known twice as well"
    assert estimate.to_dict()["improvement"]["quantity"] == "h"
