"""The uncertainty budget: which source the variance of each reported quantity is from.

Linear at the posterior's mode. Readings y = J z + sum E_s u_s with independent standard normal u_s for each
source of errors, and rows R_s of prior information: with C = sum E_s E_s', S = (J'C^-1 J + sum R_s'R_s)^-1, a
quantity of gradient g that also moves by b_s u_s (its own dependence on a length) is off by

    h = g - J'C^-1 E b,   w = C^-1 (J S h + E b),   variance of source s: |E_s'w - b_s|² + |R_s S h|²,

and these add up to the variance of the whole, h'S h + b'(1 - E'C^-1 E) b. An average over candidates adds the
spread of their means as a source of its own.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import derived, geometry, least_squares, posing, summaries
from finback.estimate import BudgetKind, BudgetLine, Expanded, Improvement, Summary
from finback.parameters import LABELS, PRACTICE, UNMEASURED_AIR, Parameter
from finback.posing import ErrorSource
from finback.problem import Problem
from finback.routes import Outcome

Array = NDArray[np.float64]

WEIGHTY = 0.005  # probability of a candidate from which it has a part in the budget
OF_ALL = {"position": "hole positions", "misfit": "smooth misfit of the model"}
CANDIDATES = "spread of the candidates"
WIDE = "wide defaults"
UNREAD_AIR = "air temperature, neither read nor stated"
HEATER = "heater, as an upper bound"
HEATS = {"heat": "the heat reading", "heater": "the heater's power"}

CAREFUL_HOLES, CAREFUL_CALIBRATION, READ_AIR = 0.2e-3, 0.1, 0.5  # m, K, K: what a careful laboratory reaches
HALF = 0.5  # of the uncertainty it has: four readings for one, or a better one
TARGETS = ("h", "h_over_k")  # what an improvement is looked for, the first that is determined
WORTH_SAYING = 0.9  # of the standard deviation, to which an improvement must bring it
COVERAGE_FACTOR = 2.0
NOT_LINEAR = 0.15  # of the half width, by which U or the interval's middle may be off


@dataclass(frozen=True, slots=True)
class Source:
    """One source of uncertainty.

    `effect` (n, a): what one standard uncertainty of each of its a errors makes of the readings; `slope`
    (a, q): what it makes of the quantities themselves; `rows` (b, p): square root of the information on the
    parameters that it is. `change`: words for a better one, whose three arrays are in `better`.
    """

    name: str
    kind: BudgetKind
    effect: Array
    slope: Array
    rows: Array
    change: str = ""
    better: "Source | None" = None


@dataclass(frozen=True, slots=True)
class Linear:
    """One candidate, linear at its mode.

    `names` (q): quantities; `values` (q,) at the mode, `gradients` (p, q); `jacobian` (n, p) of the readings.
    """

    names: tuple[str, ...]
    values: Array
    gradients: Array
    jacobian: Array
    sources: tuple[Source, ...]

    def variances(self, improved: str = "") -> Array:
        """Return the variances of the quantities by source (n_sources, q), one source being improved."""
        sources = [s.better if s.name == improved and s.better is not None else s for s in self.sources]
        effect = np.concatenate([s.effect for s in sources], axis=1)
        slope = np.concatenate([s.slope for s in sources])
        rows = np.concatenate([s.rows for s in sources])
        covariance = effect @ effect.T
        scale = 1 / np.sqrt(np.diag(covariance))
        whiten = np.linalg.inv(np.linalg.cholesky(covariance * np.outer(scale, scale))) * scale
        seen, moved = whiten @ self.jacobian, whiten @ (effect @ slope)
        gradient = self.gradients - seen.T @ moved
        response = _solve(seen.T @ seen + rows.T @ rows, gradient)
        pull = whiten.T @ (seen @ response + moved)
        return np.array(
            [
                np.square(s.effect.T @ pull - s.slope).sum(axis=0) + np.square(s.rows @ response).sum(axis=0)
                for s in sources
            ]
        )


@dataclass(frozen=True, slots=True)
class Budget:
    """The lines of a budget, largest share of h first; value ± U by quantity; what would help most."""

    lines: tuple[BudgetLine, ...]
    expanded: Mapping[str, Expanded]
    improvement: Improvement | None


def collect(
    outcomes: Sequence[Outcome],
    probabilities: Array,
    evaluated: Sequence[Mapping[str, Array]],
    found: Mapping[str, Summary],
) -> Budget:
    """Return the budget of all quantities that are determined and not exactly known.

    Arguments: outcomes, best first; probabilities of their candidates; evaluated, the quantities of their
    draws; found, the summaries by name.
    """
    first_joint = next((i for i, o in enumerate(outcomes) if o.problem.candidate.joint), 0)
    used = [i for i, p in enumerate(probabilities) if p >= WEIGHTY or i in (0, first_joint)]
    parts = [_part(float(probabilities[i]), outcomes[i], evaluated[i]) for i in used]
    averages = {}
    for name, summary in found.items():
        having = [part for part in parts if part.has(name)]
        if summary.median is not None and summary.sd and having:
            averages[name] = _Average(name, having)
    expanded = {name: average.expanded(found[name]) for name, average in averages.items()}
    return Budget(_lines(averages), expanded, _improvement(averages))


@dataclass(frozen=True, slots=True)
class _Part:
    """One candidate of an average: its linear variances by source, and mean and variance of its draws."""

    probability: float
    linear: Linear
    variances: Array
    means: Mapping[str, float]
    spreads: Mapping[str, float]

    def has(self, name: str) -> bool:
        return name in self.means and name in self.linear.names


def _part(probability: float, outcome: Outcome, draws: Mapping[str, Array]) -> _Part:
    linear = linearise(outcome)
    means = {name: float(values.mean()) for name, values in draws.items()}
    spreads = {name: float(values.var()) for name, values in draws.items()}
    return _Part(probability, linear, linear.variances(), means, spreads)


@dataclass(frozen=True, slots=True)
class _Average:
    """One quantity averaged over the candidates that have it."""

    name: str
    parts: Sequence[_Part]

    @property
    def weights(self) -> Array:
        weights = np.array([part.probability for part in self.parts]) + np.finfo(np.float64).tiny
        return np.asarray(weights / weights.sum())

    def variances(self, improved: str = "") -> dict[str, float]:
        """Return the posterior variance by source, each candidate's shared out as its linear one."""
        found: dict[str, float] = {}
        for weight, part in zip(self.weights, self.parts, strict=True):
            column, linear = part.linear.names.index(self.name), part.linear
            before = part.variances[:, column]
            after = linear.variances(improved)[:, column] if improved else before
            whole = float(before.sum())
            unit = weight * part.spreads[self.name] / whole if whole > 0 else 0.0
            for source, variance in zip(linear.sources, after, strict=True):
                found[source.name] = found.get(source.name, 0.0) + unit * float(variance)
        means = np.array([part.means[self.name] for part in self.parts])
        if len(means) > 1:
            found[CANDIDATES] = self._between(means)
        return found

    def expanded(self, summary: Summary) -> Expanded:
        """Return value ± U, linear all the way, and whether that does for the posterior's interval."""
        columns = [part.linear.names.index(self.name) for part in self.parts]
        values = np.array([p.linear.values[c] for p, c in zip(self.parts, columns, strict=True)])
        within = np.array([p.variances[:, c].sum() for p, c in zip(self.parts, columns, strict=True)])
        sd = float(np.sqrt(self.weights @ within + self._between(values)))
        value = float(summaries.to_reported(self.name, np.array(self.weights @ values)))
        return Expanded(value, COVERAGE_FACTOR * sd, is_linear(value, COVERAGE_FACTOR * sd, summary))

    def _between(self, means: Array) -> float:
        return float(self.weights @ np.square(means - self.weights @ means))


def is_linear(value: float, expanded: float, summary: Summary) -> bool:
    """Tell whether value ± U says what the posterior's 95 % interval does, to 15 % of its half width."""
    if summary.low95 is None or summary.high95 is None:
        return False
    half, middle = (summary.high95 - summary.low95) / 2, (summary.high95 + summary.low95) / 2
    return max(abs(expanded - half), abs(middle - value)) <= NOT_LINEAR * half


def _lines(averages: Mapping[str, _Average]) -> tuple[BudgetLine, ...]:
    shares: dict[str, dict[str, float]] = {}
    for name, average in averages.items():
        variances = average.variances()
        whole = sum(variances.values())
        for source, variance in variances.items():
            if whole > 0:
                shares.setdefault(source, {})[name] = float(variance / whole)
    kinds = {s.name: s.kind for average in averages.values() for p in average.parts for s in p.linear.sources}
    leading = next((name for name in TARGETS if name in averages), "")
    lines = [BudgetLine(source, kinds.get(source, "systematic"), each) for source, each in shares.items()]
    lines.sort(key=lambda line: -line.share_of_variance.get(leading, 0.0))
    return tuple(line for line in lines if any(line.share_of_variance.values()))


def _improvement(averages: Mapping[str, _Average]) -> Improvement | None:
    """Return the change of one source that would help most, if it helps enough to be told."""
    target = next((name for name in TARGETS if name in averages), None)
    if target is None:
        return None
    average = averages[target]
    now = sum(average.variances().values())
    best = None
    changes = {s.name: s.change for part in average.parts for s in part.linear.sources if s.better}
    for source, change in changes.items():
        left = float(np.sqrt(sum(average.variances(source).values()) / now))
        if left <= WORTH_SAYING and (best is None or left < best.sd_ratio):
            best = Improvement(target, source, change, left)
    return best


def linearise(outcome: Outcome) -> Linear:
    """Return one candidate, linear at its posterior's mode; an estimated noise is at its posterior median."""
    problem, z, n = outcome.problem, outcome.mode.z, outcome.problem.n_physical
    here = derived.evaluate(problem, z[None])
    gradients = {
        name: gradient
        for name, gradient in geometry.gradients(problem, z).items()
        if np.isfinite(gradient).all() and name not in ("misfit", "noise")
    }
    names = tuple(gradients)
    slopes = geometry.slopes(problem, z)
    by_lengths = {
        length: np.array([slopes[name][i] if name in slopes else 0.0 for name in names])
        for i, (length, _) in enumerate(posing.uncertain_lengths(problem.rig))
    }

    def predict(block: Array) -> Array:
        return problem.predict(np.concatenate([block, np.tile(z[n:], (len(block), 1))], axis=1))

    jacobian = least_squares.jacobian(predict, z[:n])
    readings = len(problem.measured.values)
    if problem.shared is not None:
        jacobian[:readings, problem.are_shared] = problem.shared
    sources = (
        *_of_errors(outcome, len(names)),
        *_of_shared(problem, len(names)),
        *_of_lengths(problem, by_lengths),
        *_of_heaters(problem, predict(z[None, :n])[0, readings:], jacobian[readings:], len(names)),
        *_of_priors(problem, len(names)),
    )
    return Linear(
        names,
        np.array([float(here[name][0]) for name in names]),
        np.stack([*gradients.values()], axis=1),
        jacobian[:readings],
        sources,
    )


def _of_errors(outcome: Outcome, quantities: int) -> list[Source]:
    """Return noise, calibration and hole positions, each with what a careful laboratory would make of it."""
    problem, sigma = outcome.problem, outcome.point.sigma
    if problem.noise.estimated:
        draws = outcome.draws.reshape(-1, outcome.draws.shape[-1])
        sigma = float(np.median(problem.values(draws)["noise"]))
    share = math.exp(outcome.point.z[problem.n_physical]) if problem.candidate.misfit else 0.0
    found = []
    for error in posing.error_sources(problem, outcome.point.z, sigma, share):
        name = OF_ALL.get(error.kind, f"{error.kind} of {_words(problem, error.place)}")
        source = Source(
            name,
            "random" if error.kind == "noise" else "systematic",
            error.effect,
            np.zeros((error.effect.shape[1], quantities)),
            np.zeros((0, problem.n_physical)),
        )
        change, effect = _improved(problem, error)
        if change:
            source = replace(source, change=change, better=replace(source, effect=effect))
        found.append(source)
    return found


def _improved(problem: Problem, error: ErrorSource) -> tuple[str, Array]:
    """Return words for a smaller error and its effect; no words where there is nothing to gain."""
    words, effect = _words(problem, error.place), error.effect
    if error.kind == "misfit":
        return "", effect
    if error.kind == "position":
        sds = [s.position_sd for s in problem.measured.sensors if s.place == "fin"]
        smaller = np.array([min(sd, CAREFUL_HOLES) / sd if sd > 0 else 1.0 for sd in sds])
        change = f"hole positions known to {1e3 * CAREFUL_HOLES:g} mm" if smaller.min() < 1 else ""
        return change, effect * smaller
    if error.place in HEATS:
        return f"{words} known twice as well", HALF * effect
    if error.kind == "noise":
        return f"the noise of {words} halved by averaging", HALF * effect
    change = f"{words} calibrated to {CAREFUL_CALIBRATION:g} K" if effect.max() > CAREFUL_CALIBRATION else ""
    return change, np.minimum(effect, CAREFUL_CALIBRATION)


def _words(problem: Problem, place: str) -> str:
    """Return what the sensors of a place are called."""
    count = sum(sensor.place == place for sensor in problem.measured.sensors)
    return HEATS.get(place, f"the {place} sensor{'s' if count > 1 else ''}")


def _of_lengths(problem: Problem, slopes: Mapping[str, Array]) -> list[Source]:
    """Return the uncertain lengths, with what they make of each quantity itself: (q,) each."""
    if problem.by_lengths is None:
        return []
    found = []
    for (length, slope), effect in zip(slopes.items(), problem.by_lengths.T, strict=True):
        words = f"{length.replace('_', ' ')} of the fin"
        source = Source(
            words, "systematic", effect[:, None], slope[None], np.zeros((0, problem.n_physical)),
            f"the {words} known twice as well",
        )  # fmt: skip
        better = replace(source, effect=HALF * source.effect, slope=HALF * source.slope)
        found.append(replace(source, better=better))
    return found


def _of_shared(problem: Problem, quantities: int) -> list[Source]:
    """Return the errors that are unknowns beside heavy tails, under the names that they have otherwise."""
    if problem.shared is None:
        return []
    found = []
    for i, effect in enumerate(problem.shared.T, start=problem.are_shared.start):
        name = problem.names[i].removesuffix("_error").replace("_", " ")
        words = f"{name} of the fin"
        change, factor = f"the {words} known twice as well", HALF
        if name == "calibration":
            words = f"calibration of {_words(problem, 'fin')}"
            change, smaller = _improved(problem, ErrorSource("calibration", "fin", effect[:, None]))
            factor = float(smaller.max() / effect.max())
        row = np.eye(problem.n_physical)[i : i + 1]
        nothing = np.zeros((len(effect), 0)), np.zeros((0, quantities))
        source = Source(words, "systematic", *nothing, row, change)
        found.append(replace(source, better=replace(source, rows=row / factor)) if change else source)
    return found


def _of_heaters(problem: Problem, predicted: Array, jacobian: Array, quantities: int) -> list[Source]:
    """Return the heaters that only bound the heat, with the curvature of their likelihood ln Phi."""
    measured = problem.measured
    if not measured.bounds:
        return []
    from scipy.special import log_ndtr

    margin = (measured.bound_values - predicted) / measured.bound_sds
    slope = np.exp(-0.5 * np.square(margin) - 0.5 * np.log(2 * np.pi) - log_ndtr(margin))
    root = np.sqrt(np.clip(slope * (slope + margin), 0.0, None)) / measured.bound_sds
    n = len(measured.values)
    return [
        Source(HEATER, "systematic", np.zeros((n, 0)), np.zeros((0, quantities)), root[:, None] * jacobian)
    ]


def _of_priors(problem: Problem, quantities: int) -> list[Source]:
    """Return what was known beforehand, by parameter; the wide defaults together."""
    rows: dict[str, list[Array]] = {}
    changes: dict[str, tuple[str, float]] = {}
    for i, parameter in enumerate(problem.parameters[: problem.are_shared.start]):
        name = _name(parameter)
        row = np.zeros(problem.n_physical)
        row[i] = 1 / parameter.prior.sd
        rows.setdefault(name, []).append(row)
        if name == UNREAD_AIR:
            changes[name] = f"the air read to {READ_AIR:g} K", READ_AIR / parameter.prior.sd
        elif parameter.stated and parameter.prior != PRACTICE.get(parameter.name):
            changes[name] = f"the {LABELS[parameter.name]} known twice as well", HALF
    found = []
    for name, each in rows.items():
        source = Source(
            name,
            "prior",
            np.zeros((len(problem.measured.values), 0)),
            np.zeros((0, quantities)),
            np.array(each),
        )
        if name in changes:
            change, factor = changes[name]
            source = replace(source, change=change, better=replace(source, rows=source.rows / factor))
        found.append(source)
    return found


def _name(parameter: Parameter) -> str:
    """Return what the knowledge of a parameter beforehand is called."""
    if parameter.prior == PRACTICE.get(parameter.name):
        return f"{LABELS[parameter.name]}, common practice"
    if parameter.stated:
        return f"{LABELS[parameter.name]}, as stated"
    if parameter.name == "air" and parameter.prior == UNMEASURED_AIR:
        return UNREAD_AIR
    return WIDE


def _solve(precision: Array, gradients: Array) -> Array:
    """Return precision^-1 gradients, scaled so that units do not matter."""
    scale = 1 / np.sqrt(np.diag(precision))
    found: Array = scale[:, None] * np.linalg.solve(
        precision * np.outer(scale, scale), scale[:, None] * gradients
    )
    return found
