"""Turning the candidates' draws into reported numbers: averages, intervals, what is determined.

Each candidate adds draws in proportion to its probability, so that an interval carries their spread.
The joint's resistance is averaged over the candidates that have a joint: whether there is one is a
probability, how large it is a number. Where there is rather none, the number is an upper limit.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import derived, identifiability, parameters
from finback.derived import DERIVED
from finback.estimate import DeterminedBy, Summary
from finback.identifiability import Information
from finback.linear import LinearAnswers
from finback.routes import Outcome

Array = NDArray[np.float64]

OF_THE_JOINT = ("joint", "joint_times_k")
LIMITED = {"h": ("h",), "k": ("k",), "joint": ("joint",), "joint_times_k": ("k", "joint")}
"""Positive quantities that may have an upper limit only, and the parameters whose product each is."""
POSITIVE = (*LIMITED, "h_over_k")
"""Quantities that are more than a limit only where they lie clear of zero."""
SCATTER = ("misfit", "noise")
"""What no physical parameter changes."""
AT_LIMIT = 0.01  # of all draws: those next to a limit, which say what all else is there
ONE_SIDED = 0.95  # probability of a limit where only a limit exists
BEYOND = 3.0  # times its limit: where a quantity would have been seen, if the limit is the readings'


@dataclass(frozen=True)
class Mixture:
    """Draws averaged over candidates.

    `chosen`: which outcome each draw is from and its index there, (chains, n) each; `values`: (chains, n) by
    quantity, SI units, nan where a candidate has no such quantity.
    """

    which: NDArray[np.intp]
    index: NDArray[np.intp]
    values: Mapping[str, Array]


def deal(weights: Array, n: int) -> NDArray[np.intp]:
    """Return how many of n draws each outcome adds, in proportion to weights that sum to one."""
    return np.diff(np.round(np.concatenate([[0.0], np.cumsum(weights)]) * n).astype(int))


def mix(
    outcomes: Sequence[Outcome],
    weights: Array,
    evaluated: Sequence[Mapping[str, Array]],
    n: int | None = None,
) -> Mixture:
    """Average over outcomes, each adding draws in proportion to its weight.

    Arguments: outcomes; weights, their probabilities, summing to one; evaluated, the quantities of all draws
    of each outcome, flat (chains * its own n,); n, the draws of a chain of the average, as many as of the
    first outcome if left out.
    """
    chains, own = outcomes[0].draws.shape[:2]
    n = own if n is None else n
    counts = deal(weights, n)
    which = np.repeat(np.arange(len(outcomes)), counts)
    index = np.empty((chains, n), dtype=np.intp)
    names = {name: None for each, count in zip(evaluated, counts, strict=True) if count for name in each}
    values = {name: np.full((chains, n), np.nan) for name in names}
    start = 0
    for outcome, quantities, count in zip(outcomes, evaluated, counts, strict=True):
        here = slice(start, start + count)
        own_chains, own_n = outcome.draws.shape[:2]
        picked = np.linspace(0, own_n - 1, count).astype(int)
        rows = np.arange(chains)[:, None] % own_chains
        index[:, here] = rows * own_n + picked
        for name, found in quantities.items():
            if count:
                values[name][:, here] = found[index[:, here]]
        start += count
    return Mixture(np.broadcast_to(which, (chains, n)), index, values)


@dataclass(frozen=True)
class Judge:
    """What one candidate says of how well each quantity is known: information and gradients at its mode."""

    outcome: Outcome
    information: Information
    values: Mapping[str, float]
    gradients: Mapping[str, Array]
    linear: LinearAnswers | None

    def summarise(self, name: str, draws: Array, absent: bool = False) -> Summary:
        """Return the summary of one quantity from its draws (any shape, SI units).

        `absent`: whether there is rather no such thing, more probably than not: then only a limit is given.
        """
        label, unit = describe(name)
        exact = name in self.outcome.problem.fixed
        gradient = self.gradients.get(name)
        if exact or name in SCATTER or gradient is None:
            determined = True
        else:
            determined = self.information.determines(gradient)
            if name in POSITIVE:
                determined = determined and self.information.clears_zero(gradient, self.values[name])
        least_squares, standard_error = self._least_squares(name)
        if absent or not determined:
            limit = self._upper_limit(name, draws)
            low = None if limit is None else 0.0
            return Summary(name, label, unit, None, None, None, low, limit, None, None, "prior")
        shown = to_reported(name, draws)
        low, median, high = (float(q) for q in _quantiles(shown, (0.025, 0.5, 0.975)))
        return Summary(
            name,
            label,
            unit,
            median,
            float(shown.mean()),
            0.0 if exact else float(shown.std(ddof=1)),
            low,
            high,
            least_squares,
            standard_error,
            self._source(name, gradient, exact),
        )

    def _source(self, name: str, gradient: Array | None, exact: bool) -> DeterminedBy:
        if exact:
            return "prior"
        if name in SCATTER or gradient is None:
            return "both" if name == "misfit" else "readings"
        return self.information.source(gradient)

    def _least_squares(self, name: str) -> tuple[float | None, float | None]:
        if name == "noise":
            return self.outcome.point.sigma, None
        if name == "misfit" or self.linear is None:
            return None, None
        value, standard_error = self.linear.answer(name)
        return None if value is None else float(to_reported(name, np.array(value))), standard_error

    def _upper_limit(self, name: str, draws: Array) -> float | None:
        """Return the one-sided upper limit of a positive quantity, if larger values would have been seen.

        Were it a few times its limit, the readings would determine it: then they exclude what lies beyond,
        and the limit is theirs and not the prior's.
        """
        problem = self.outcome.problem
        if name not in LIMITED or name not in self.gradients:
            return None
        limit = float(np.quantile(draws, ONE_SIDED))
        columns = [i for i, parameter in enumerate(problem.names) if parameter in LIMITED[name]]
        flat = self.outcome.draws.reshape(-1, self.outcome.draws.shape[-1])
        known = sum(float(np.log(problem.fixed[part])) for part in LIMITED[name] if part in problem.fixed)
        away = np.abs(flat[:, columns].sum(axis=1) + known - np.log(limit))
        at = flat[np.argsort(away)[: max(1, int(AT_LIMIT * len(flat)))]].mean(axis=0)
        at[columns[-1]] += np.log(BEYOND)
        sigma = float(np.exp(at[-1])) if problem.noise.estimated else self.outcome.point.sigma
        there = identifiability.information(problem, at, sigma)
        gradient = np.zeros(problem.n_physical)
        gradient[columns] = 1.0
        return limit if there.determines(gradient) else None


def judge(outcome: Outcome, least_squares: bool = True) -> Judge:
    """Return the judge of one outcome, at its posterior mode; with the least-squares answers if wanted."""
    problem, z = outcome.problem, outcome.mode.z
    sigma = float(np.exp(z[-1])) if problem.noise.estimated else outcome.point.sigma
    information = identifiability.information(problem, z, sigma, bounds=False)
    values = {name: float(each[0]) for name, each in derived.evaluate(problem, z[None]).items()}
    linear = LinearAnswers(outcome.point) if least_squares else None
    return Judge(outcome, information, values, derived.gradients(problem, z), linear)


def _quantiles(values: Array, probabilities: Sequence[float]) -> Array:
    """Return quantiles as `numpy.quantile` does by straight lines, in a fifth of its time for few values."""
    at = np.asarray(probabilities) * (values.size - 1)
    below = at.astype(np.intp)
    above = np.minimum(below + 1, values.size - 1)
    sorted_there = np.partition(values, np.union1d(below, above), axis=None)
    low: Array = sorted_there[below]
    return low + (at - below) * (sorted_there[above] - low)


def describe(name: str) -> tuple[str, str]:
    """Return label and reported unit of a parameter or derived quantity."""
    if name in DERIVED:
        return DERIVED[name].label, DERIVED[name].unit
    return parameters.LABELS[name], parameters.unit_of(name)


def to_reported(name: str, values: Array) -> Array:
    """Return SI values of any quantity in its reported unit."""
    return derived.reported(name, values) if name in DERIVED else parameters.reported(name, values)
