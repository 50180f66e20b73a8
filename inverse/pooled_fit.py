"""One candidate on all runs of a pool: where it is best, and the density of what the runs share.

Gauss-Newton steps in all unknowns at once lead from a coarse grid to the mode. The marginal density of the
shared unknowns then has own unknowns and common errors integrated by Laplace's method, anew for each value of
the shared ones (a nested Laplace approximation), with the noise among the shared ones: joint with so many
own unknowns its most probable value would be far too small.
Source: Rue, Martino, Chopin, J. R. Stat. Soc. B 71 (2009) 319, section 3.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

from finback import arrow, laplace
from finback.arrow import Solved, State
from finback.laplace import Mode
from finback.noise import REFERENCE_SIGMA
from finback.optimum import FALLS
from finback.parameters import UNMEASURED_AIR, Parameter
from finback.pooled_model import Group, Model
from finback.problem import LOG_TWO_PI

Array = NDArray[np.float64]

SHORTER = (1.0, 0.5, 0.2, 0.05, 0.01)  # shares of a joint step that are tried
MOST_STEPS = 60
FREE_STEPS = 8  # after which the effects of shared errors stay as they are, and the noise
FEWEST_SPREAD = 3  # runs of a group for each of their own unknowns, whose spread is then looked at
ROUNDS = 3  # of the mode, and the effects of shared errors there
NUDGE = 0.2  # of a shared error, for how the curvature in own unknowns goes with it
DONE = 1e-6  # nats that a joint step would gain
SETTLED = 0.03  # nats that a last step would gain: it is not taken, and its gain is right to a thousandth
KEPT = 3_000_000  # numbers that are held at a time
LARGEST_STEP = 1.0  # of a shared unknown in one step, in its coordinate, unless that is a temperature
TRIED_RUNS = 30  # of a group, for where shared unknowns start
GRID_H = np.linspace(math.log(0.3), math.log(3e4), 47)
GRIDS: dict[str, Array] = {
    "k": np.log([2.0, 10.0, 40.0, 120.0, 350.0]),
    "joint": np.log([3e-6, 3e-5, 3e-4, 3e-3]),
}


@dataclass(frozen=True)
class Fitted:
    """A candidate at its mode.

    `model`, with the effects of shared errors there; `mode` of the shared unknowns (q + noise,), None where
    there are none; `state`, of one draw; `solved`, with the shared unknowns in the border; `log_evidence`;
    `density`, the log density of the shared unknowns, from a block (draws, q + noise) to (draws,).
    """

    model: Model
    mode: Mode | None
    state: State
    solved: Solved
    log_evidence: float
    density: Callable[[Array], Array]

    @property
    def z(self) -> Array:
        """The shared unknowns at the mode (q + noise,)."""
        return np.zeros(0) if self.mode is None else self.mode.z


def fit(model: Model) -> Fitted:
    """Find the mode of a candidate. Raises numpy's LinAlgError where its numbers come to nothing."""
    z, state = start_of(model)
    model, z, state, solved = _descend(model, z, state)
    model, state, solved = _tilted(model, z, state, solved)
    root = _root(model, solved, z)
    mode: Mode | None = None
    for _ in range(ROUNDS):
        density = _density(model, z, state, solved)
        if not len(z):
            break
        mode = laplace.find_mode(density, z, root)
        z, root = mode.z, mode.root
        s, sigma = parts(model, z[None])
        state, _ = arrow.settle(model, state, s, sigma, DONE)
        model, state, solved = _tilted(model, z, state, arrow.solve(model, state, s, sigma, shared=True))
    density = _density(model, z, state, solved)
    if mode is None:
        return Fitted(model, None, state, solved, float(density(z[None])[0]), density)
    height = float(density(z[None])[0])
    mode = replace(mode, log_density=height)
    return Fitted(model, mode, state, solved, mode.log_evidence, density)


def _tilted(model: Model, z: Array, state: State, solved: Solved) -> tuple[Model, State, Solved]:
    """Return the model with the effects of shared errors at a state, and with its tilt; settled and solved.

    Own unknowns are integrated before the errors that runs share: their curvature changes a little with each
    of these in every run, and that adds up. So does what the spread of own unknowns over the runs tells.
    """
    s, sigma = parts(model, z[None])
    model = model.linearised([w[0] for w in state.w], s[0], state.u[0])
    q, m = model.n_physical, len(model.errors)
    if m:
        nudges = NUDGE * np.concatenate([np.eye(m), -np.eye(m)])
        w = [
            own[0] + np.einsum("rpm,dm->drp", response[0, :, :, q:], nudges)
            for own, response in zip(state.w, solved.responses, strict=True)
        ]
        nudged = State(w, state.u[0] + nudges)
        found = arrow.solve(model, nudged, np.repeat(s, 2 * m, axis=0), np.repeat(sigma, 2 * m)).log_det_own
        model = replace(model, tilt=-0.5 * (found[:m] - found[m:]) / (2 * NUDGE))
    at = np.concatenate([s[0], state.u[0]])
    model = replace(model, lean=_lean(model, state, solved), lean_from=at)
    state, _ = arrow.settle(model, state, s, sigma, DONE)
    return model, state, arrow.solve(model, state, s, sigma, shared=True)


def _lean(model: Model, state: State, solved: Solved) -> Array:
    """Return what the spread of own unknowns over the runs tells of what they share (q + m,) [nats].

    Wide priors of own unknowns say that runs differ by factors of ten and hundreds of kelvin. They don't, and
    were that taken for evidence, a thousand runs would favour whatever shared unknowns draw the readings
    closest together. So the spread is learnt: runs are as probable as by a normal distribution with the mean
    and covariance V that own unknowns w have over the runs of a group, with the gradient
    -sum over runs of (w - mean)' V^-1 dw/dg in the shared ones g. Own unknowns do not feel it.
    """
    found = np.zeros(model.n_physical + len(model.errors))
    for group, own, responses in zip(model.groups, state.w, solved.responses, strict=True):
        wide = [j for j, parameter in enumerate(group.own) if not parameter.stated]
        if group.problem is None or group.size < FEWEST_SPREAD * len(wide):
            continue
        away = own[0][:, wide] - own[0][:, wide].mean(axis=0)
        covariance = np.atleast_2d(np.cov(away.T))
        weighted = away @ np.linalg.pinv(covariance, hermitian=True)
        found -= np.einsum("rp,rpg->g", weighted, responses[0][:, wide])
    return found


def parts(model: Model, z: Array) -> tuple[Array, Array]:
    """Return the physical shared unknowns (D, q) and sigma (D,) [K] of draws (D, q + noise)."""
    if model.noise_estimated:
        return z[:, :-1], np.exp(np.clip(z[:, -1], -30.0, 30.0))
    return z, np.ones(len(z))


def _descend(model: Model, z: Array, state: State) -> tuple[Model, Array, State, Solved]:
    """Take joint steps until they gain nothing; the noise follows from the residuals."""
    q = model.n_physical
    step = np.zeros(0)
    limits = np.array([np.inf if p.transform == "identity" else LARGEST_STEP for p in model.shared[:q]])
    for number in range(MOST_STEPS):
        s, sigma = parts(model, z[None])
        if number < FREE_STEPS:
            model = model.linearised([w[0] for w in state.w], s[0], state.u[0])
        solved = arrow.solve(model, state, s, sigma, shared=True)
        if model.noise_estimated and number < FREE_STEPS:
            z = np.append(z[:-1], 0.5 * math.log(max(solved.scatter, 1e-12)))
            sigma = np.exp(z[-1:])
            solved = arrow.solve(model, state, s, sigma, shared=True)
        if solved.gain[0] < DONE and number >= FREE_STEPS:
            break
        step = np.clip(solved.step[0, :q], -limits, limits)
        for share in SHORTER:
            trial = state.moved(solved.steps, np.array([share]))
            at = s + share * step
            if arrow.cost_of(model, trial, at, sigma)[0] < solved.cost[0] + 1e-12:
                state, z = trial, np.concatenate([at[0], z[q:]])
                break
        else:
            if number >= FREE_STEPS:
                break
    s, sigma = parts(model, z[None])
    return model, z, state, arrow.solve(model, state, s, sigma, shared=True)


def _root(model: Model, solved: Solved, z: Array) -> Array:
    """Return a guess of a root of the covariance of the shared unknowns (q + noise, q + noise)."""
    q = model.n_physical
    covariance = np.zeros((len(z), len(z)))
    covariance[:q, :q] = np.linalg.inv(solved.border[0])[:q, :q]
    if model.noise_estimated:
        count = sum(int(group.are_estimated.sum()) * group.size for group in model.groups)
        covariance[q, q] = 1 / max(count, 1)
    return np.asarray(np.linalg.cholesky(covariance)) if len(z) else covariance


def _density(model: Model, z: Array, state: State, solved: Solved) -> Callable[[Array], Array]:
    """Return the log density of the shared unknowns, own ones and common errors integrated.

    Arguments: z, state and solved at the mode, from where each draw sets out along a straight line.
    """
    q, m = model.n_physical, len(model.errors)
    border = solved.border[0]
    follow = -np.linalg.solve(border[q:, q:], border[q:, :q]) if m else np.zeros((0, q))
    lines = [each[0, :, :, :q] + each[0, :, :, q:] @ follow for each in solved.responses]
    held = sum(w.shape[1] * w.shape[2] * (m + 4) for w in state.w)
    at_a_time = max(1, KEPT // held)
    constant = -sum(group.size * float(np.log(group.own_sds).sum()) for group in model.groups)
    readings = sum(group.values.size for group in model.groups)
    constant -= 0.5 * readings * LOG_TWO_PI
    constant += 0.5 * sum(
        float(np.log(group.weights[:, : group.values.shape[1]]).sum()) for group in model.groups
    )

    def some(block: Array) -> Array:
        s, sigma = parts(model, block)
        away = s - z[:q]
        w = [own[0] + np.einsum("rpq,dq->drp", line, away) for own, line in zip(state.w, lines, strict=True)]
        at, found = arrow.settle(model, State(w, state.u[0] + away @ follow.T), s, sigma, SETTLED)
        errors = at.u + found.steps.u
        log = constant - (found.cost - found.gain) - errors @ model.tilt - 0.5 * found.log_det
        log = log + s @ model.lean[:q] - model.lean_from @ model.lean
        for i, parameter in enumerate(model.shared):
            prior = parameter.prior
            log = (
                log
                - 0.5 * ((block[:, i] - prior.mean) / prior.sd) ** 2
                - math.log(prior.sd)
                - 0.5 * LOG_TWO_PI
            )
        return np.where(np.isfinite(log), log, -np.inf)

    def density(block: Array) -> Array:
        with np.errstate(all="ignore"):
            pieces = [some(block[i : i + at_a_time]) for i in range(0, len(block), at_a_time)]
        return np.concatenate(pieces)

    return density


def start_of(model: Model) -> tuple[Array, State]:
    """Return where to set out from: shared unknowns (q + noise,) and a state of one draw, from a grid."""
    physical = model.shared[: model.n_physical]
    grids = [_grid_of(parameter) for parameter in physical]
    choices = np.array(list(product(*grids)), dtype=np.float64)
    few = [_fewer(group) for group in model.groups]
    costs = np.array([sum(_own_start(group, s)[1].sum() for group in few) for s in choices])
    s = choices[int(np.argmin(costs))]
    starts = [_own_start(group, s)[0][None] for group in model.groups]
    z = np.append(s, math.log(REFERENCE_SIGMA)) if model.noise_estimated else s
    return z, State(starts, np.zeros((1, len(model.errors))))


def _grid_of(parameter: Parameter) -> Array:
    if parameter.name in GRIDS and not parameter.stated:
        return GRIDS[parameter.name]
    return np.array([parameter.prior.mean])


def _fewer(group: Group) -> Group:
    """Return some runs of a group, evenly chosen."""
    at = np.unique(np.linspace(0, group.size - 1, min(group.size, TRIED_RUNS)).astype(int))
    return replace(
        group,
        runs=group.runs[at],
        values=group.values[at],
        variances=group.variances[at],
        fixed={name: each[at] for name, each in group.fixed.items()},
        bound_values=group.bound_values[at],
        bound_sds=group.bound_sds[at],
        calibrations=group.calibrations[at],
    )


def _own_start(group: Group, s: Array) -> tuple[Array, Array]:
    """Return the own unknowns (R, p) that are best on a grid in h, and half their squares (R,)."""
    if group.problem is None:
        return group.values.mean(axis=1, keepdims=True), np.zeros(group.size)
    problem, count = group.problem, group.size
    positions = problem.measured.positions
    near, far = (group.values[:, end(positions)] for end in (np.argmin, np.argmax))
    level = {"base_temperature": near, "tip_temperature": far, "surroundings": None}
    level |= {sensor.place: group.values[:, i] for i, sensor in enumerate(group.sensors)}
    airs: list[Array | float] = [UNMEASURED_AIR.mean, *(far - fall * (near - far) for fall in FALLS)]
    if "air" in level:
        airs = [level["air"]]  # type: ignore[list-item]
    elif "air" in group.fixed:
        airs = [group.fixed["air"]]
    elif problem.rig.surroundings.air is not None:
        airs = [problem.rig.surroundings.air.value]
    names = [parameter.name for parameter in group.own]
    best, lowest = np.tile(group.own_means, (count, 1)), np.full(count, np.inf)
    for air in airs:
        w = np.tile(group.own_means, (count, 1))
        for j, name in enumerate(names):
            told = air if name == "air" else level.get(name)
            if told is not None:
                w[:, j] = told
        found, cost = _best_h(group, w, np.broadcast_to(air, (count,)), s)
        better = cost < lowest
        best, lowest = np.where(better[:, None], found, best), np.where(better, cost, lowest)
    return best, lowest


def _best_h(group: Group, w: Array, air: Array, s: Array) -> tuple[Array, Array]:
    """Return own unknowns (R, p) with the h of a grid that is best in each run, and half the squares (R,)."""
    names = [parameter.name for parameter in group.own]
    count, n_fin = len(w), len(group.problem.measured.positions) if group.problem else 0
    n = group.values.shape[1]
    block = np.repeat(w[:, None], len(GRID_H), axis=1)
    block[:, :, names.index("h")] = GRID_H
    runs = np.repeat(np.arange(count), len(GRID_H))
    flat_s = np.broadcast_to(s, (len(runs), len(s)))

    def predicted() -> Array:
        return group.predict(block.reshape(len(runs), -1), flat_s, runs).reshape(count, len(GRID_H), -1)

    found = predicted()
    if "base_temperature" in names:  # whose own excess scales that of the fin
        column = names.index("base_temperature")
        shape, excess = found[..., :n_fin] - air[:, None, None], group.values[:, :n_fin] - air[:, None]
        scale = np.einsum("rhn,rn->rh", shape, excess) / np.maximum(np.square(shape).sum(axis=2), 1e-12)
        block[:, :, column] = air[:, None] + np.clip(scale, 0.1, 1e3) * (block[:, :, column] - air[:, None])
        found = predicted()
    sigma = np.where(group.estimated, REFERENCE_SIGMA, 0.0)
    variances = group.variances + group.calibrations**2 + sigma**2
    residuals = group.values[:, None] - found[..., :n]
    cost = 0.5 * (residuals**2 / np.maximum(variances, 1e-4)[:, None]).sum(axis=2)
    cost += 0.5 * np.square(found[..., n:]).sum(axis=2)
    cost = np.where(np.isfinite(cost), cost, 1e30)
    at = cost.argmin(axis=1)
    return block[np.arange(count), at], cost[np.arange(count), at]
