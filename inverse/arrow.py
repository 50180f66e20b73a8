"""Newton steps for unknowns of which most belong to one run each and a few to all: an arrow-shaped system.

With rows of residuals r, weights W, slopes J in a run's own unknowns and K in those that all runs share, the
normal equations of Gauss and Newton have a block J'WJ for each run and a border J'WK. Own unknowns are
eliminated run by run,

    S = 1 + sum over runs of (K'WK - V'V),   V = L^-1 J'WK,   L L' = J'WJ,

so that time and memory grow with the number of runs, and nothing is approximated. Several draws of what is
held fixed (shared unknowns s, noise sigma) are solved side by side.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.pooled_model import Group, Model

Array = NDArray[np.float64]

PREDICTIONS = 16_384  # of a piece: as many as are quick and small
LARGEST_STEP = 1.0  # of an own unknown in one step, in its widest sd or in a logarithm
SHORTER, SHORTEST = 0.3, 0.003  # share of a step that is tried next, and at which none is any more
MOST_ROUNDS = 30
SHARED_STEP = 1e-4  # of differences in shared unknowns, or a thousandth of their sd


@dataclass
class State:
    """Where draws stand: own unknowns of each group (draws, R, p), and errors in common u (draws, m)."""

    w: list[Array]
    u: Array

    def of(self, draws: NDArray[np.intp]) -> "State":
        """Return the state of some draws alone."""
        return State([own[draws] for own in self.w], self.u[draws])

    def with_draws(self, draws: NDArray[np.intp], other: "State") -> "State":
        """Return the state with these draws as in another, which has them alone."""
        w, u = [own.copy() for own in self.w], self.u.copy()
        for own, theirs in zip(w, other.w, strict=True):
            own[draws] = theirs
        u[draws] = other.u
        return State(w, u)

    def moved(self, steps: "State", share: Array) -> "State":
        """Return the state moved by shares (draws,) of steps."""
        at = share[:, None, None]
        w = [own + at * step for own, step in zip(self.w, steps.w, strict=True)]
        return State(w, self.u + share[:, None] * steps.u)


@dataclass(frozen=True)
class Solved:
    """A linearised system with its solution.

    `cost` (draws,), half the weighted sum of squares and the log variances that hang on sigma; `gain`
    (draws,), by how much a full step lowers it [nats]; `log_det` (draws,), of the curvature in own unknowns
    and u, `log_det_own` in own ones; `border` (draws, q + m, q + m), the curvature in shared unknowns with
    the own ones eliminated, and `step` (draws, q + m) in them, of which q are solved for where asked;
    `steps`, in everything but s;
    `responses`, of own unknowns to those of the border (draws, R, p, q + m) a group; `spreads`, covariances
    of own unknowns given the border's (draws, R, p, p); `squares` (R,) a group, weighted squares of each
    run's readings, and `freedom`, how many of them its own unknowns use up; `scatter`, mean square of the
    readings with an estimated noise [K²], with what their own unknowns leave open. The last five are of the
    first draw only.
    """

    cost: Array
    gain: Array
    log_det: Array
    log_det_own: Array
    border: Array
    step: Array
    steps: State
    responses: list[Array]
    spreads: list[Array]
    squares: list[Array]
    freedom: list[Array]
    scatter: float

    def with_draws(self, draws: NDArray[np.intp], other: "Solved", chosen: NDArray[np.intp]) -> "Solved":
        """Return what was solved, with these draws as the chosen ones of another."""
        changed = {}
        for name in ("cost", "gain", "log_det", "log_det_own", "border", "step"):
            each = getattr(self, name).copy()
            each[draws] = getattr(other, name)[chosen]
            changed[name] = each
        first = other if draws[0] == 0 else self
        kept = {name: getattr(first, name) for name in ("spreads", "squares", "freedom", "scatter")}
        steps = self.steps.with_draws(draws, other.steps.of(chosen))
        return Solved(**changed, **kept, steps=steps, responses=first.responses)


@dataclass
class _Sums:
    """Sums over runs of what the border needs."""

    cost: Array
    gain: Array
    log_det: Array
    border: Array
    pull: Array
    scatter: float = 0.0
    counted: int = 0


def solve(model: Model, state: State, s: Array, sigma: Array, shared: bool = False) -> Solved:
    """Linearise at a state and take a Gauss-Newton step.

    Arguments: model, with the effects of its errors; state of D draws; s (D, q); sigma (D,) [K]; shared,
    whether s is solved for too, with its prior, of one draw alone.
    """
    draws, m, q = len(s), len(model.errors), s.shape[1] if shared else 0
    cost, gain, log_det = np.zeros((3, draws))
    sums = _Sums(cost, gain, log_det, np.zeros((draws, q + m, q + m)), np.zeros((draws, q + m)))
    pieces = [list(_pieces(model, group, w, s, state.u, sigma, shared, sums))
              for group, w in zip(model.groups, state.w, strict=True)]  # fmt: skip
    if shared and q:
        means, sds = _beforehand(model)
        sums.pull[:, :q] -= (s - means) / sds**2
        sums.border[:, range(q), range(q)] += sds**-2
        sums.cost += 0.5 * np.square((s - means) / sds).sum(axis=1)
    sums.border[:, range(q, q + m), range(q, q + m)] += 1.0
    sums.pull[:, q:] += push_of(model) - state.u
    sums.cost += 0.5 * np.square(state.u).sum(axis=1) - state.u @ push_of(model)
    log_det_own = sums.log_det.copy()
    step = np.asarray(np.linalg.solve(sums.border, sums.pull[..., None])[..., 0])
    sums.gain += 0.5 * np.einsum("dg,dg->d", sums.pull, step)
    sums.log_det += np.linalg.slogdet(sums.border)[1]
    own_steps, responses, spreads, squares, freedom = [], [], [], [], []
    for group, found in zip(model.groups, pieces, strict=True):
        moved = [own - np.einsum("drpg,dg->drp", response, step) for own, response, *_ in found]
        limits = np.minimum(group.own_sds, LARGEST_STEP) if group.problem else group.own_sds
        limits = np.where([p.transform == "identity" for p in group.own], np.inf, limits)
        own_steps.append(np.clip(np.concatenate(moved, axis=1), -limits, limits))
        responses.append(np.concatenate([-each[1] for each in found], axis=1))
        spreads.append(np.concatenate([each[2] for each in found]))
        squares.append(np.concatenate([each[3] for each in found]))
        freedom.append(np.concatenate([each[4] for each in found]))
    scatter = sums.scatter / sums.counted if sums.counted else 0.0
    steps = State(own_steps, step[:, q:])
    return Solved(
        sums.cost,
        sums.gain,
        sums.log_det,
        log_det_own,
        sums.border,
        step,
        steps,
        responses,
        spreads,
        squares,
        freedom,
        scatter,
    )


def settle(model: Model, state: State, s: Array, sigma: Array, tolerance: float) -> tuple[State, Solved]:
    """Find the best own unknowns and errors in common, with s and sigma held.

    Arguments: as those of `solve`; tolerance [nats] of what a last step would gain, which is not taken. A
    step that does not lower the cost is shortened, draw by draw; draws that have settled are left alone.
    """
    best, found = state, solve(model, state, s, sigma)
    share = np.ones(len(s))
    for _ in range(MOST_ROUNDS):
        at = np.flatnonzero((found.gain > tolerance) & (share > SHORTEST))
        if not len(at):
            break
        trial = best.of(at).moved(found.steps.of(at), share[at])
        tried = solve(model, trial, s[at], sigma[at])
        better = tried.cost < found.cost[at]
        share[at] = np.where(better, 1.0, share[at] * SHORTER)
        if better.any():
            chosen = np.flatnonzero(better)
            best = best.with_draws(at[chosen], trial.of(chosen))
            found = found.with_draws(at[chosen], tried, chosen)
    return best, found


def cost_of(model: Model, state: State, s: Array, sigma: Array) -> Array:
    """Return the cost of each draw (D,) with the prior of the shared unknowns, without linearising."""
    found = 0.5 * np.square(state.u).sum(axis=1) - state.u @ push_of(model)
    if s.shape[1]:
        means, sds = _beforehand(model)
        found = found + 0.5 * np.square((s - means) / sds).sum(axis=1)
    for group, w in zip(model.groups, state.w, strict=True):
        for runs in _blocks(group, len(s), 1):
            own = w[:, runs]
            predicted = _predict(group, own, s, runs)
            bending = _bending(group, state.u, runs)
            residuals = _residuals(group, predicted, own, s, state.u, bending, runs)
            weights, logs = _weights(group, runs, sigma)
            found = found + 0.5 * np.einsum("drn,drn->d", residuals**2, weights) + logs
    return np.where(np.isfinite(found), found, np.inf)


def push_of(model: Model) -> Array:
    """Return what errors in common are pushed by beside readings and their own sizes (m,) [nats]."""
    return np.asarray(model.tilt + model.lean[model.n_physical :])


def _beforehand(model: Model) -> tuple[Array, Array]:
    priors = [parameter.prior for parameter in model.shared[: model.n_physical]]
    return np.array([prior.mean for prior in priors]), np.array([prior.sd for prior in priors])


def _blocks(group: Group, draws: int, predictions: int) -> Iterator[slice]:
    at_a_time = max(1, PREDICTIONS // (draws * predictions))
    for start in range(0, group.size, at_a_time):
        yield slice(start, min(start + at_a_time, group.size))


def _predict(group: Group, w: Array, s: Array, runs: slice) -> Array:
    """Predict readings and bounds for own unknowns (D, R, p) and shared ones (D, q)."""
    draws, count, p = w.shape
    numbers = np.tile(np.arange(runs.start, runs.stop), draws)
    found = group.predict(w.reshape(-1, p), np.repeat(s, count, axis=0), numbers)
    return found.reshape(draws, count, -1)


def _bending(group: Group, u: Array, runs: slice) -> Array:
    """Return what errors in common add to slopes of readings (D, R, n, p + q) in own and shared unknowns."""
    bends, u = group.bends[runs], u - group.anchor_errors
    return np.asarray((u @ bends.reshape(-1, u.shape[1]).T).reshape(len(u), *bends.shape[:3]))


def _away(group: Group, w: Array, s: Array, runs: slice) -> Array:
    """Return how far unknowns (D, R, p + q) are from where the effects of errors were taken."""
    shared = np.broadcast_to((s - group.anchor_shared)[:, None], (*w.shape[:2], s.shape[1]))
    return np.concatenate([w - group.anchor[runs], shared], axis=2)


def _residuals(
    group: Group, predicted: Array, w: Array, s: Array, u: Array, bending: Array, runs: slice
) -> Array:
    """Return residuals of all rows (D, R, N)."""
    errors = group.errors[runs]
    count, rows, m = errors.shape
    common = ((u - group.anchor_errors) @ errors.reshape(-1, m).T).reshape(len(u), count, rows)
    common[..., : bending.shape[2]] += np.einsum("drnc,drc->drn", bending, _away(group, w, s, runs))
    return np.asarray(group.targets[runs] - np.concatenate([predicted, w], axis=2) - common)


def _weights(group: Group, runs: slice, sigma: Array) -> tuple[Array, Array]:
    """Return weights (D, R, N), and what the log variances add to the cost (D,)."""
    weights = group.weights[None, runs]
    count = int(group.are_estimated.sum())
    if not count:
        return np.broadcast_to(weights, (len(sigma), *weights.shape[1:])), np.zeros(len(sigma))
    factor = np.where(group.are_estimated, sigma[:, None, None] ** -2, 1.0)
    return weights * factor, count * weights.shape[1] * np.log(sigma)


def _pieces(
    model: Model, group: Group, w: Array, s: Array, u: Array, sigma: Array, shared: bool, sums: _Sums
) -> Iterator[tuple[Array, Array, Array, Array, Array]]:
    """Add the runs of a group to the sums, block by block.

    Yields for each block the own step given no step of the border (D, R, p), what the border's takes off it
    (D, R, p, q + m), and of the first draw the spreads (R, p, p), squares (R,) and freedom (R,).
    """
    draws, _, p = w.shape
    q = s.shape[1] if shared else 0
    s_widths = np.minimum(1e-3 * _beforehand(model)[1], SHARED_STEP) if q else np.zeros(0)
    readings = group.values.shape[1]
    if not q:
        stated, estimated = group.seen
        sums.border += stated + estimated * sigma[:, None, None] ** -2
    for runs in _blocks(group, draws, 1 + 2 * (p + q)):
        own = w[:, runs]
        centre = _predict(group, own, s, runs)
        slopes = np.zeros((draws, own.shape[1], group.rows, p))
        for j in range(p):
            nudge = np.zeros(p)
            nudge[j] = group.widths[j]
            up, down = (_predict(group, own + sign * nudge, s, runs) for sign in (1, -1))
            slopes[:, :, : up.shape[2], j] = (up - down) / (2 * group.widths[j])
            slopes[:, :, up.shape[2] + j, j] = 1.0
        errors, bending = group.errors[runs], _bending(group, u, runs)
        slopes[:, :, :readings] += bending[..., :p]
        border = np.zeros((draws if q else 0, own.shape[1], group.rows, q))
        for j in range(q):
            nudge = np.zeros(q)
            nudge[j] = s_widths[j]
            up, down = (_predict(group, own, s + sign * nudge, runs) for sign in (1, -1))
            border[:, :, : up.shape[2], j] = (up - down) / (2 * s_widths[j])
        away = _away(group, own, s, runs)
        if q:  # of one draw
            border[:, :, :readings] += bending[..., p:]
            errors = errors.copy()
            errors[:, :readings] += np.einsum("rncm,rc->rnm", group.bends[runs], away[0])
        border = np.concatenate([border, errors[None]], axis=3) if q else errors[None]
        residuals = _residuals(group, centre, own, s, u, bending, runs)
        weights, logs = _weights(group, runs, sigma)
        weighted = slopes.transpose(0, 1, 3, 2) * weights[:, :, None]
        root = np.linalg.inv(np.linalg.cholesky(weighted @ slopes))
        across = root @ (weighted @ border)
        pull = root @ (weighted @ residuals[..., None])
        if q:
            flat = (border[0] * np.sqrt(weights[0])[..., None]).reshape(-1, border.shape[3])
            sums.border += flat.T @ flat
        seen = across.reshape(draws, -1, across.shape[-1])
        sums.border -= seen.transpose(0, 2, 1) @ seen
        pulled = weights * residuals
        sums.pull += pulled.reshape(draws, -1) @ border[0].reshape(-1, border.shape[3])
        if not q:
            moved = pulled[..., :readings, None] * away[:, :, None]
            sums.pull += moved.reshape(draws, -1) @ group.bends[runs].reshape(-1, border.shape[3])
        sums.pull -= (seen.transpose(0, 2, 1) @ pull.reshape(draws, -1, 1))[..., 0]
        sums.cost += 0.5 * np.einsum("drn,drn->d", residuals**2, weights) + logs
        sums.gain += 0.5 * np.square(pull).sum(axis=(1, 2, 3))
        sums.log_det -= 2 * np.log(np.einsum("drpp->drp", root)).sum(axis=(1, 2))
        back = root.transpose(0, 1, 3, 2)
        spread = back[0] @ root[0]
        used = np.einsum("rnp,rpk,rnk,rn->rn", slopes[0], spread, slopes[0], weights[0])[:, :readings]
        squares = (residuals[0] ** 2 * weights[0])[:, :readings]
        if group.estimated.any():
            chosen = group.estimated
            at = sigma[0] ** 2
            sums.scatter += at * float((squares[:, chosen] + used[:, chosen]).sum())
            sums.counted += int(chosen.sum()) * own.shape[1]
        yield (
            (back @ pull)[..., 0],
            back @ across,
            spread,
            squares.sum(axis=1),
            readings - used.sum(axis=1),
        )
