"""What a cause costs: heat and base temperature now, and what they would be with the cause put right."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.densities import Weighed
from finback.faults import key
from finback.hypotheses import Hypothesis
from finback.models import solve
from finback.parameters import ZERO_CELSIUS
from finback.priors import Normal
from finback.rig import TipName
from finback.suspects import Suspect

Array = NDArray[np.float64]

DRAWS = 1000  # a hypothesis
PARAMETERS = ("h", "k", "joint", "emissivity")


@dataclass(frozen=True, slots=True)
class Interval:
    """Median and 95 % interval of a quantity, in its `unit`."""

    median: float
    low95: float
    high95: float
    unit: str


@dataclass(frozen=True, slots=True)
class Effects:
    """What a fin does by one hypothesis, draw by draw: heat into the fin [W] and base temperature [K].

    `now` (2, n); `healthy` (2, n), with everything put right; `restored`, by the key of each suspect of the
    hypothesis, with that one put right, (2, n) each; `values` (n,) of the parameters by name, SI units, and
    `right`, what those of a healthy fin would be.
    """

    now: Array
    healthy: Array
    restored: Mapping[tuple[str, str | None, str | None], Array]
    values: Mapping[str, Array]
    right: Mapping[str, Array]


def effects(
    weighed: Weighed, healthy: Mapping[str, Normal], tip: TipName | None, random: np.random.Generator
) -> Effects:
    """Return what a hypothesis means for heat and base temperature.

    Arguments: weighed; healthy, what parameters of a healthy fin are; tip as it is drawn, None where the rig
    leaves that open; random. The plate keeps its temperature, and so does the air, but where its own is what
    is wrong: there it is put back to what was read.
    """
    hypothesis = weighed.hypothesis
    chosen = random.permutation(weighed.posterior.resample(DRAWS, random))
    z = weighed.posterior.z[chosen]
    problem = hypothesis.base.problem
    values = dict(problem.values(z))
    right = {
        name: problem.parameters[problem.names.index(name)].values(
            random.normal(prior.mean, prior.sd, len(z))
        )
        for name, prior in healthy.items()
        if name in problem.names
    }
    own = problem.candidate.tip
    now = _solve(hypothesis, values, own)
    changes = {key(suspect): _put_right(hypothesis, suspect, right) for suspect in hypothesis.suspects}
    restored = {}
    every: dict[str, Array | float] = {}
    for suspect in hypothesis.suspects:
        change = changes[key(suspect)]
        every |= change
        as_drawn = tip if suspect.kind == "tip" and tip is not None else own
        unchanged = not change and as_drawn == own
        restored[key(suspect)] = now if unchanged else _solve(hypothesis, {**values, **change}, as_drawn)
    tipped = any(suspect.kind == "tip" for suspect in hypothesis.suspects)
    whole = tip if tipped and tip is not None else own
    healthy_now = now if not every and whole == own else _solve(hypothesis, {**values, **every}, whole)
    shown = {name: np.broadcast_to(np.asarray(value), (len(z),)) for name, value in values.items()}
    return Effects(now, healthy_now, restored, shown, right)


def pooled(parts: Sequence[tuple[float, Array]], unit: str, offset: float = 0.0) -> Interval:
    """Return median and 95 % interval of draws (n,) that each have a probability, less an offset."""
    values = np.concatenate([draws for _, draws in parts]) - offset
    weights = np.concatenate([np.full(len(draws), share / len(draws)) for share, draws in parts])
    order = np.argsort(values)
    below = np.cumsum(weights[order])
    below = (below - 0.5 * weights[order]) / below[-1]
    low, median, high = np.interp((0.025, 0.5, 0.975), below, values[order])
    return Interval(float(median), float(low), float(high), unit)


def of_heat(parts: Sequence[tuple[float, Array]]) -> Interval:
    """Return the interval of a heat [W] of effects (2, n) with their probabilities."""
    return pooled([(share, draws[0]) for share, draws in parts], "W")


def of_base(parts: Sequence[tuple[float, Array]], unit: str = "degC") -> Interval:
    """Return the interval of a base temperature of effects (2, n), or of a change of it in K."""
    offset = ZERO_CELSIUS if unit == "degC" else 0.0
    return pooled([(share, draws[1]) for share, draws in parts], unit, offset)


def _put_right(
    hypothesis: Hypothesis, suspect: Suspect, right: Mapping[str, Array]
) -> Mapping[str, Array | float]:
    """Return the values that a suspect's repair changes, by name."""
    if suspect.kind in PARAMETERS:
        return {suspect.kind: right[suspect.kind]}
    if suspect.kind == "air":
        names = [sensor.name for sensor in hypothesis.base.problem.measured.sensors]
        return {"air": float(hypothesis.values[names.index(str(suspect.sensor))])}
    return {}


def _solve(hypothesis: Hypothesis, values: Mapping[str, Array | float], tip: TipName) -> Array:
    """Return heat into the fin [W] and base temperature [K] (2, n)."""
    solution = solve(*hypothesis.base.problem.rig.build(values, tip), np.zeros(0))
    return np.stack([solution.base_heat, solution.base_temperature])
