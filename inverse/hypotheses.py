"""Hypotheses: what may be wrong with a run, one thing or two at once, each weighed against nothing wrong.

A wrong reading is no evidence about the fin: it is freed of its thermometer, by a large variance in the
covariance, and what the other readings say of its error is then compared with what sizes such errors have. A
swap exchanges two readings, a misfit adds the covariance of a smooth one, a cause in the fin changes what a
parameter is beforehand. The evidence decides, with the odds of `suspects`.
"""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from finback import misfit, normals, parameters, posing, suspects
from finback import noise as noises
from finback.normals import Normals, Posed
from finback.optimum import LeastSquares
from finback.priors import Normal
from finback.problem import LOG_TWO_PI, Problem
from finback.rig import Sensor
from finback.suspects import ODDS, Size, Suspect

Array = NDArray[np.float64]

FREE = 300.0  # K, or times a heat: the error of a reading that is freed of its thermometer, beforehand
LEAST_TOLD = 1e-4  # of what is known of such an error beforehand
PRESSED = 1.0  # standard deviations or so, that a heat comes near what a heater supplies
PAIRED = 8  # readings and swaps, the likeliest ones alone, of which two at a time are tried
STRIDE = 4  # levels of an unknown noise from one that is tried first to the next
FAINT = 16.0  # nats below the best, from which a row is not worked out
SLIGHTEST = 0.05  # K, W: of an error's size, below which no reading tells it from none
HOPELESS = 15.0  # nats below the best of those, from which no other level is tried
LEVELS = np.exp(np.arange(math.log(0.01), math.log(10.0), 0.25))  # K: an unknown noise
NODES = np.array([-2.0, -1.0, 0.0, 1.0, 2.0, 3.0, 4.0])  # sds of the logarithm of a misfit or a scatter
NODE_SHARES = np.exp(-0.5 * np.square(NODES)) / np.exp(-0.5 * np.square(NODES)).sum()


@dataclass(frozen=True, eq=False)
class State:
    """A state of the fin: the causes that make it do less, none where it is healthy.

    `priors`: what parameters are beforehand, by name, where that is not what the rig says of them.
    """

    causes: tuple[Suspect, ...] = ()
    priors: Mapping[str, Normal] | None = None


@dataclass(frozen=True)
class Base:
    """One candidate to weigh hypotheses about.

    `problem`, without unknown noise or misfit; `covariances` (levels, n, n) by the level of the noise, with
    their `log_shares` (levels,) beforehand; `slopes` dT/dx (n,) [K/m], 0 off the fin; `smooth` (n, n), what a
    misfit of share 1 adds, and `scatter` (n, n), what each reading along the fin has of its own, None where
    neither is looked for; `start` (p,); `tip`, the suspect that the tip is
    this one, None where the rig says so or leaves it open.
    """

    problem: Problem
    covariances: Array
    log_shares: Array
    slopes: Array
    smooth: Array | None
    scatter: Array | None
    start: Array
    tip: Suspect | None = None


@dataclass(frozen=True)
class Hypothesis:
    """One hypothesis and what came of it.

    `suspects`, what is wrong, none for nothing; `log_weight` [nats], up to a constant, of which `log_prior`
    is from before the readings; `base` and `state` it belongs to; `values` (n,) and `covariance` (n, n) of
    the readings, `freed` numbers of readings and the `sizes` of their errors, as posed; `mean` (p,) and
    `spread` (p, p) of the unknowns; `errors` (m,) and their `error_spread` (m, m), what the freed readings
    are off [K, W].
    """

    suspects: tuple[Suspect, ...]
    log_weight: float
    log_prior: float
    base: Base
    state: State
    values: Array
    covariance: Array
    freed: tuple[int, ...]
    sizes: tuple[Size, ...]
    mean: Array
    spread: Array
    errors: Array
    error_spread: Array

    @property
    def bounded(self) -> bool:
        """Whether heaters limit the heat, what they read being right."""
        heaters = {sensor.name for sensor in self.base.problem.measured.bounds}
        return not any(suspect.kind == "heat" and suspect.sensor in heaters for suspect in self.suspects)

    @property
    def means(self) -> Array:
        """Means of the unknowns beforehand (p,)."""
        return beforehand(self.base.problem, self.state)[0]

    @property
    def sds(self) -> Array:
        """Standard deviations of the unknowns beforehand (p,)."""
        return beforehand(self.base.problem, self.state)[1]


@dataclass(frozen=True, slots=True)
class _Row:
    """One row of a block: a state, the readings freed, exchanged, bent or scattered, a level of the noise."""

    state: State
    freed: tuple[int, ...] = ()
    swap: Suspect | None = None
    misfit: int | None = None
    scatter: int | None = None
    heater: Suspect | None = None
    level: int = 0


@dataclass(frozen=True, slots=True)
class _Weighed:
    """The hypotheses of one row at its levels that are not hopeless; `height`, of the best or a bound."""

    found: list[Hypothesis]
    height: float


def base(point: LeastSquares, tip: Suspect | None = None) -> Base:
    """Return a candidate to weigh hypotheses about, from its least-squares fit."""
    problem, z = point.problem, point.z
    n = len(problem.measured.values)
    if problem.noise.estimated:
        prior = problem.parameters[-1].prior
        logs = -0.5 * np.square((np.log(LEVELS) - prior.mean) / prior.sd)
        levels, log_shares = LEVELS, logs - np.log(np.exp(logs).sum())
    else:
        levels, log_shares = np.zeros(1), np.zeros(1)
    covariances = np.array([problem.noise.covariance(float(level)) for level in levels])
    slopes = np.zeros(n)
    n_fin = len(problem.measured.positions)
    slopes[:n_fin] = posing.temperature_slopes(problem, z)
    smooth = scatter = None
    if n_fin >= misfit.FEWEST_SENSORS and not problem.noise.estimated:
        smooth = posing.smooth_covariance(problem, z)
        own = sum(
            np.square(source.effect).sum(axis=1)
            for source in posing.error_sources(problem, z, 0.0)
            if source.kind in ("noise", "position") and source.place == "fin"
        )
        scatter = np.diag(np.broadcast_to(own, (n,)))
    physical = problem.n_physical
    bare = replace(
        problem,
        parameters=problem.parameters[:physical],
        noise=noises.build(covariances[0], np.zeros(n, dtype=bool)),
    )
    return Base(bare, covariances, log_shares, slopes, smooth, scatter, z[:physical], tip)


def beforehand(problem: Problem, state: State) -> tuple[Array, Array]:
    """Return means and standard deviations (p,) of a problem's unknowns in a state of its fin."""
    changed = state.priors or {}
    priors = [changed.get(parameter.name, parameter.prior) for parameter in problem.parameters]
    return np.array([prior.mean for prior in priors]), np.array([prior.sd for prior in priors])


def weigh(base: Base, states: Sequence[State]) -> list[Hypothesis]:
    """Weigh every hypothesis about one candidate: no fault, one, and those pairs of two that may matter.

    Arguments: base; states of the fin, the healthy one first.
    """
    wrong = list(_of_readings(base))
    swaps = [each for each in wrong if each.kind == "swap"]
    heaters = [Suspect("heat", ODDS["heat"], each.name) for each in _exceeded(base)]
    own = {name: [s for s in wrong if s.kind != "swap" and s.sensor == name] for name in _names(base)}
    free = [(at,) for at, name in enumerate(_names(base)) if own[name]]
    rows: list[_Row] = []
    for state in states:
        rows.append(_Row(state))
        if len(state.causes) > 1:
            continue
        rows += [_Row(state, freed) for freed in free]
        beside = swaps if not state.causes else [s for s in swaps if s.odds == swaps[0].odds]
        rows += [_Row(state, swap=swap) for swap in beside]
        rows += [_Row(state, heater=each) for each in heaters]
        if base.smooth is not None:
            rows += [_Row(state, misfit=n) for n in range(len(NODES))]
        if base.scatter is not None:
            rows += [_Row(state, scatter=n) for n in range(len(NODES))]
    singles = _weigh_rows(base, rows, own)
    ranked = [(row, each.height) for row, each in zip(rows, singles, strict=True)]
    pairs = _weigh_rows(base, _pairs(ranked, states[0]), own)
    return [each for many in singles + pairs for each in many.found]


def _exceeded(base: Base) -> tuple[Sensor, ...]:
    """Return the heater whose power the fit exceeds or nearly so: nothing speaks against another."""
    measured = base.problem.measured
    if not measured.bounds:
        return ()
    predicted = base.problem.predict(base.start[None])[0, len(measured.values) :]
    pressed = base.problem.bound_residuals(predicted) > PRESSED
    return tuple(sensor for sensor, is_so in zip(measured.bounds, pressed, strict=True) if is_so)[:1]


def _names(base: Base) -> list[str]:
    return [sensor.name for sensor in base.problem.measured.sensors]


def _of_readings(base: Base) -> Iterator[Suspect]:
    measured = base.problem.measured
    pairs = zip(measured.sensors, measured.values, strict=True)
    heats = {s.name: float(v) for s, v in pairs if s.place in ("heat", "heater") and v != 0}
    return suspects.of_readings(base.problem.rig, measured.sensors, heats)


def _pairs(found: Sequence[tuple[_Row, float]], healthy: State) -> list[_Row]:
    """Return the rows with two things wrong at once, of those that are likeliest alone."""
    best: dict[_Row, float] = {}
    for row, height in found:
        if row.state is healthy and row != _Row(healthy):
            alike = replace(row, misfit=row.misfit and 0, scatter=row.scatter and 0)
            best[alike] = max(best.get(alike, -np.inf), height)
    chosen = sorted(best, key=lambda row: -best[row])[:PAIRED]
    rows = []
    for first, second in combinations(chosen, 2):
        if first.swap is not None and second.swap is not None:
            continue
        both = _Row(healthy, tuple(sorted(first.freed + second.freed)), first.swap or second.swap)
        bent = first.misfit is not None or second.misfit is not None
        scattered = first.scatter is not None or second.scatter is not None
        if bent and scattered:
            continue
        both = replace(both, heater=first.heater or second.heater)
        nodes = range(len(NODES)) if bent or scattered else (None,)
        rows += [replace(both, misfit=n if bent else None, scatter=n if scattered else None) for n in nodes]
    return rows


def _weigh_rows(base: Base, rows: Sequence[_Row], own: Mapping[str, Sequence[Suspect]]) -> list[_Weighed]:
    """Weigh rows at every level of the noise, but for those that a few levels have shown to be hopeless."""
    levels = np.arange(len(base.log_shares))
    coarse = levels[::STRIDE]
    found = _at_levels(base, rows, coarse, own)
    if len(coarse) == len(levels):
        return found
    highest = max((each.height for each in found), default=0.0)
    kept = [n for n, each in enumerate(found) if each.height > highest - HOPELESS]
    weighed = _at_levels(base, [rows[n] for n in kept], levels, own)
    for n, many in zip(kept, weighed, strict=True):
        found[n] = many
    return found


def _at_levels(
    base: Base, rows: Sequence[_Row], levels: NDArray[np.intp], own: Mapping[str, Sequence[Suspect]]
) -> list[_Weighed]:
    """Return the hypotheses of each row, at each of some levels of the noise."""
    every = [replace(row, level=int(level)) for row in rows for level in levels]
    if not every:
        return []
    posed = _pose(base, every)
    fitted = normals.fit(base.problem, posed, base.start)
    bounds = _bounds(base, every, fitted, own)
    found: list[list[Hypothesis]] = [[] for _ in rows]
    best = -np.inf
    for number in np.argsort(-bounds).tolist():
        if bounds[number] < best - FAINT:
            break
        own_of_row = list(_hypotheses(base, every[number], posed, fitted, number, own))
        found[number // len(levels)] += own_of_row
        best = max(best, *(each.log_weight for each in own_of_row))
    highest = bounds.reshape(len(rows), len(levels)).max(axis=1)
    return [
        _Weighed(many, max((each.log_weight for each in many), default=float(bound)))
        for many, bound in zip(found, highest, strict=True)
    ]


def _bounds(base: Base, rows: Sequence[_Row], fitted: Normals, own: Mapping[str, Sequence[Suspect]]) -> Array:
    """Return what the log weight of each row's hypotheses can be at the most (n_rows,)."""
    names, free = _names(base), free_errors(base)
    log_odds = {name: math.log(max((s.odds for s in kinds), default=1.0)) for name, kinds in own.items()}
    narrowest = {
        name: min((float(_in_kelvin(base, s, names.index(name)).sds.min()) for s in kinds), default=1.0)
        for name, kinds in own.items()
    }
    found = fitted.log_evidence.copy()
    for number, row in enumerate(rows):
        found[number] += base.log_shares[row.level] + _log_prior(base, row)
        for at in row.freed:  # a wide normal gives way to a size, which is nowhere denser than its narrowest
            density = max(narrowest[names[at]], SLIGHTEST)
            found[number] += log_odds[names[at]] + math.log(free[at] / density)
    return found


def _pose(base: Base, rows: Sequence[_Row]) -> Posed:
    names = _names(base)
    free = free_errors(base)
    values = np.tile(base.problem.measured.values, (len(rows), 1))
    covariances = base.covariances[[row.level for row in rows]]
    before: dict[int, tuple[Array, Array]] = {}
    for number, row in enumerate(rows):
        if row.swap is not None:
            pair = [names.index(name) for name in (row.swap.sensor, row.swap.other) if name is not None]
            values[number, pair] = values[number, pair[::-1]]
        for at in row.freed:
            covariances[number, at, at] += free[at] ** 2
        if row.misfit is not None and base.smooth is not None:
            covariances[number] += _share(row.misfit) ** 2 * base.smooth
        if row.scatter is not None and base.scatter is not None:
            covariances[number] += _times(row.scatter) ** 2 * base.scatter
        before.setdefault(id(row.state), beforehand(base.problem, row.state))
    means, sds = (np.array([before[id(row.state)][i] for row in rows]) for i in (0, 1))
    bounded = np.array([float(row.heater is None) for row in rows])
    return Posed(values, covariances, means, sds, bounded)


def _share(node: int) -> float:
    prior = parameters.DEFAULT_PRIORS["misfit"][1]
    return math.exp(prior.mean + float(NODES[node]) * prior.sd)


def _times(node: int) -> float:
    return float(suspects.SCATTER * suspects.SCATTER_FACTOR ** float(NODES[node]))


def free_errors(base: Base) -> Array:
    """Return the error beforehand (n,) of each reading that is freed of its thermometer [K, W]."""
    measured = base.problem.measured
    return np.array(
        [
            FREE if sensor.reads_temperature else FREE * abs(value)
            for sensor, value in zip(measured.sensors, measured.values, strict=True)
        ]
    )


def _wrong(base: Base, row: _Row) -> tuple[Suspect, ...]:
    """Return what is wrong by a row, but for the readings that it frees."""
    found = [*row.state.causes]
    found += [] if base.tip is None else [base.tip]
    found += [] if row.swap is None else [row.swap]
    found += [] if row.heater is None else [row.heater]
    found += [] if row.misfit is None else [SMOOTH]
    found += [] if row.scatter is None else [SCATTERED]
    return tuple(found)


def _log_prior(base: Base, row: _Row) -> float:
    """Return the log probability beforehand of a row, but for its level and the readings that it frees."""
    found = sum(math.log(suspect.odds) for suspect in _wrong(base, row))
    for node in (row.misfit, row.scatter):
        found += 0.0 if node is None else math.log(NODE_SHARES[node])
    return found


def _hypotheses(
    base: Base,
    row: _Row,
    posed: Posed,
    fitted: Normals,
    number: int,
    own: Mapping[str, Sequence[Suspect]],
) -> Iterator[Hypothesis]:
    """Yield the hypotheses of one row: each kind of error that its freed readings may have."""
    log_prior = float(base.log_shares[row.level]) + _log_prior(base, row)
    evidence = float(fitted.log_evidence[number])
    wrong = _wrong(base, row)
    names = _names(base)
    mean, spread = fitted.modes[number], fitted.spreads[number]
    values, whole = posed.values[number], posed.covariances[number]
    if not row.freed:
        yield Hypothesis(
            suspects=wrong,
            log_weight=log_prior + evidence,
            log_prior=log_prior,
            base=base,
            state=row.state,
            values=values,
            covariance=whole,
            freed=(),
            sizes=(),
            mean=mean,
            spread=spread,
            errors=np.zeros(0),
            error_spread=np.zeros((0, 0)),
        )
        return
    freed, sd = list(row.freed), free_errors(base)[list(row.freed)]
    errors, covariance, with_unknowns = fitted.freed(number, freed, sd)
    seen = _by_others(covariance, sd)
    told = seen @ np.linalg.solve(covariance, errors)
    evidence -= _log_normal(told, seen + np.diag(np.square(sd)))
    for kinds in _products([own[names[at]] for at in freed]):
        sizes = tuple(_in_kelvin(base, suspect, at) for suspect, at in zip(kinds, freed, strict=True))
        log_size, error, error_spread = _sized(told, seen, sizes)
        log_kinds = log_prior + sum(math.log(suspect.odds) for suspect in kinds)
        gain = with_unknowns @ np.linalg.inv(covariance)
        yield Hypothesis(
            suspects=(*wrong, *kinds),
            log_weight=log_kinds + evidence + log_size,
            log_prior=log_kinds,
            base=base,
            state=row.state,
            values=values,
            covariance=whole,
            freed=row.freed,
            sizes=sizes,
            mean=mean + gain @ (error - errors),
            spread=spread + gain @ (error_spread - covariance) @ gain.T,
            errors=error,
            error_spread=error_spread,
        )


def _by_others(covariance: Array, sd: Array) -> Array:
    """Return what the other readings alone leave open of errors (m, m), given their covariance with a prior.

    What they say nothing of stays finite: wider than that prior, and no more.
    """
    scale = 1 / sd
    told = np.linalg.inv(covariance / np.outer(sd, sd)) - np.eye(len(sd))
    weights, axes = np.linalg.eigh((told + told.T) / 2)
    root = axes / np.sqrt(np.maximum(weights, LEAST_TOLD))
    return np.asarray((root @ root.T) / np.outer(scale, scale))


def _in_kelvin(base: Base, suspect: Suspect, at: int) -> Size:
    assert suspect.size is not None
    return suspect.size.scaled(base.slopes[at]) if suspect.kind == "shift" else suspect.size


def _products(choices: Sequence[Sequence[Suspect]]) -> Iterator[tuple[Suspect, ...]]:
    if not choices:
        yield ()
        return
    for first in choices[0]:
        for rest in _products(choices[1:]):
            yield (first, *rest)


def _sized(told: Array, seen: Array, sizes: Sequence[Size]) -> tuple[float, Array, Array]:
    """Return the log probability of errors as other readings tell them (m,), and what they are with sizes.

    Arguments: told (m,) and seen (m, m), mean and covariance by the other readings; sizes, beforehand. The
    sizes of two errors make a grid of normal distributions, each combined with what the readings tell.
    """
    shares, means, variances = _grid(sizes)
    away = told - means
    both = np.linalg.inv(seen + variances[:, :, None] * np.eye(len(sizes)))
    pulls = np.einsum("cmk,ck->cm", both, away)
    logs = np.log(shares) + 0.5 * (np.log(np.linalg.det(both)) - (away * pulls).sum(axis=1))
    logs -= 0.5 * len(sizes) * LOG_TWO_PI
    highest = float(logs.max())
    weights = np.exp(logs - highest)
    total = float(weights.sum())
    weights /= total
    pulled = means + variances * pulls
    error = weights @ pulled
    apart = pulled - error
    left = variances[:, :, None] * (np.eye(len(sizes)) - both * variances[:, None, :])
    spread = np.einsum("c,cmn->mn", weights, left) + apart.T @ (weights[:, None] * apart)
    return highest + math.log(total), error, spread


def sizes_together(told: Array, seen: Array, sizes: Sequence[Size]) -> Array:
    """Return the log probability of errors (n_sets, m) with sizes, seen with a covariance (m, m)."""
    shares, means, variances = _grid(sizes)
    both = seen + variances[:, :, None] * np.eye(len(sizes))
    logs = np.log(shares) - 0.5 * (np.linalg.slogdet(both)[1] + len(sizes) * LOG_TWO_PI)
    whiten = np.linalg.inv(np.linalg.cholesky(both))
    whitened = told @ whiten.transpose(0, 2, 1) - np.einsum("cmk,ck->cm", whiten, means)[:, None]
    logs = logs[:, None] - 0.5 * np.square(whitened).sum(axis=-1)
    highest = logs.max(axis=0)
    return np.asarray(highest + np.log(np.exp(logs - highest).sum(axis=0)))


def _grid(sizes: Sequence[Size]) -> tuple[Array, Array, Array]:
    """Return the sizes of several errors as normal distributions: shares (c,), means, variances (c, m)."""
    grids = np.meshgrid(*[np.arange(len(size.shares)) for size in sizes], indexing="ij")
    pairs = [(size, grid.ravel()) for size, grid in zip(sizes, grids, strict=True)]
    return (
        np.prod([size.shares[at] for size, at in pairs], axis=0),
        np.stack([size.means[at] for size, at in pairs], axis=-1),
        np.stack([np.square(size.sds[at]) for size, at in pairs], axis=-1),
    )


def _log_normal(away: Array, covariance: Array) -> float:
    squares = float(away @ np.linalg.solve(covariance, away))
    return -0.5 * (squares + float(np.linalg.slogdet(2 * math.pi * covariance)[1]))


SMOOTH = Suspect("misfit", ODDS["misfit"])
SCATTERED = Suspect("scatter", ODDS["scatter"])
