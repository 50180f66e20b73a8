"""Newton's method for a block of non-linear fins at once, on the equations of `nodes`.

With u and the loads p of `nodes`, and a plate at T_plate behind a joint of R''/A_b [K/W],

    f = u - Phi_b lift - Phi_tip tip_lift + C p = 0,          T_b - T_plate + (R''/A_b) Q = 0,
    Q = conductance (Phi_b - Phi_tip) + lift . p.

The derivative of f by u, multiplied by C^-1, is C^-1 + D, with D the slopes of flux over potential: symmetric
and positive definite, so that there always is a step. A step is halved until the residual falls. The start is
a fin whose flux is a straight line of the potential, for which C^-1 + D is inverted by the modes of C, once
for all sets: an effective coefficient, fitted to the fluxes that it leads to. Potentials count from the air's
temperature.

Source: Deuflhard, Newton Methods for Nonlinear Problems, Springer 2004, chapter 3 (halving).
"""

from dataclasses import dataclass, fields, is_dataclass, replace
from typing import Any, Protocol, TypeVar

import numpy as np
from numpy.typing import NDArray

from finback.models.conductivity import Conductivity, ConstantConductivity
from finback.models.nodes import Nodes
from finback.models.surface import SurfaceLaw

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Rows = NDArray[np.intp]
Values = float | Array
Kind = TypeVar("Kind")

TINY = float(np.finfo(np.float64).tiny)
TOLERANCE = 1e-10
"""Error of a potential over its range [1], as the last two steps show it, at which a set has converged."""
HALVINGS = 30
"""Most times a step is halved [1]."""
START = 0.7
"""Temperature at which a fin starts [1], from that of the air, or of a held tip, to that of its base."""
FITS = 2
"""Times a line is fitted to the fluxes before the first step [1]."""
ROOM = 2**20
"""Entries of the matrices that are solved at a time [1], 8 MB: sets on many nodes take turns."""


class EndLaw(Protocol):
    """The law of a tip's face: flux [W/m²] and its derivative [W/(m² K)], as a `SurfaceLaw` has them."""

    @property
    def linear(self) -> bool:
        """Whether the flux is proportional to the excess temperature."""

    def response(self, surface: Array, air: Values, place: Values = 0.0, /) -> tuple[Array, Array]:
        """Heat flux [W/m²] and its derivative by the temperature [W/(m² K)]."""


@dataclass(frozen=True, slots=True)
class Cases:
    """What differs from set to set; an array has a value for each.

    conductivity, surface: the laws; tip, the law of the last node if that is a tip's face with a law of its
    own, else None; temperatures [K] of the air, of what drives the base (the plate, or the base itself), and
    of a held tip; resistance R''/A_b [K/W] of the joint, None without one; lowest and highest potential [W/m]
    of all that heats or cools the fin.
    """

    conductivity: Conductivity
    surface: SurfaceLaw
    tip: EndLaw | None
    air: Values
    driving: Values
    held: Values
    resistance: Values | None
    lowest: Array
    highest: Array

    @property
    def linear(self) -> bool:
        """Whether one step solves them all."""
        straight = self.surface.linear and (self.tip is None or self.tip.linear)
        return straight and isinstance(self.conductivity, ConstantConductivity)

    @property
    def span(self) -> Array:
        """Range of the potential [W/m], above zero."""
        return np.maximum(self.highest - self.lowest, TINY)

    def temperatures(self, potential: Array) -> tuple[Array, Values]:
        """Return temperature [K] and conductivity [W/(m K)] at a potential [W/m].

        Beyond all that heats and cools the fin, where a step may lead but no solution lies, k stays the same.
        """
        if isinstance(self.conductivity, ConstantConductivity):
            return np.asarray(self.conductivity.temperature(potential, self.air)), self.conductivity.value
        inside = np.minimum(np.maximum(potential, self.lowest), self.highest)
        temperature = self.conductivity.temperature(inside, self.air)
        k = self.conductivity.at(temperature)
        return temperature + (potential - inside) / k, k

    def potential(self, temperature: Values) -> Array:
        """Return the potential [W/m] of a temperature [K], with a value for each set."""
        return np.zeros_like(self.lowest) + self.conductivity.potential(temperature, self.air)


def take(value: Kind, rows: Rows) -> Kind:
    """Return a value, or a frozen dataclass of values, with some rows of each array that has one a set."""
    if isinstance(value, np.ndarray):
        several = value.ndim == 1 and value.size > 1
        return value[rows] if several else value  # type: ignore[return-value]  # an array's rows are an array
    if not is_dataclass(value) or isinstance(value, type):
        return value
    parts = {field.name: getattr(value, field.name) for field in fields(value)}
    taken: dict[str, Any] = {name: take(part, rows) for name, part in parts.items()}
    changed = {name: part for name, part in taken.items() if part is not parts[name]}
    return replace(value, **changed) if changed else value


@dataclass(frozen=True, slots=True)
class State:
    """Where a block stands, its sets along the last axis.

    u (n, n_sets) [W]; base (n_sets,), potential [W/m]; temperatures (n, n_sets) [K] of the nodes; loads p
    [W/m] and slopes D [1/m], both (n, n_sets); residual f (n, n_sets) [W]; of the joint, zero without one:
    gap (n_sets,) [K], its residual, and base_conductivity (n_sets,) [W/(m K)]; heat Q (n_sets,) [W]; error
    (n_sets,), the mean square of the residuals [W²/m²].
    """

    u: Array
    base: Array
    temperatures: Array
    loads: Array
    slopes: Array
    residual: Array
    gap: Array
    base_conductivity: Array
    heat: Array
    error: Array

    def take(self, rows: Rows) -> "State":
        """Return the state of some sets."""
        return State(**{field.name: getattr(self, field.name)[..., rows] for field in fields(self)})


def solve(nodes: Nodes, cases: Cases, steps: int, start: State | None = None) -> tuple[State, Flags]:
    """Solve a block; return where it stands after at most so many steps, and which sets have converged.

    A start is the state that the first step sets out from, if one is known.
    """
    n_sets = len(cases.lowest)
    state = _start(nodes, cases) if start is None else start
    u, base = np.array(state.u), np.array(state.base)
    active, converged = np.arange(n_sets), np.zeros(n_sets, dtype=np.bool_)
    here, last = cases, np.ones(n_sets)
    for _ in range(steps):
        state, size, whole = _step(nodes, here, state)
        done = whole & (cases.linear | (size * np.minimum(size / last, 1.0) <= TOLERANCE))
        u[:, active], base[active], converged[active] = state.u, state.base, done
        rows = np.flatnonzero(~done)
        if not rows.size:
            break
        last = size
        if rows.size < 0.7 * len(active):
            active, last, state, here = active[rows], last[rows], state.take(rows), take(here, rows)
    return state if len(active) == n_sets else evaluate(nodes, cases, u, base), converged


def evaluate(nodes: Nodes, cases: Cases, u: Array, base: Array) -> State:
    """Return a block's state at u (n, n_sets) [W] and the base's potential (n_sets,) [W/m]."""
    roots = nodes.roots[:, None]
    temperatures, k = cases.temperatures(u / roots)
    flux, slope = cases.surface.response(temperatures, cases.air, nodes.places[:, None])
    if cases.tip is not None:
        tip_flux, tip_slope = cases.tip.response(temperatures[-1], cases.air, 1.0)
        flux, slope = np.vstack([flux[:-1], tip_flux]), np.vstack([slope[:-1], tip_slope])
    loads = roots * flux
    residual = u - nodes.lift[:, None] * base + nodes.compliance @ loads
    heat = nodes.lift @ loads
    if nodes.conductance:
        held = held_potential(nodes, cases)
        residual -= nodes.tip_lift[:, None] * held
        heat += nodes.conductance * (base - held)
    error = np.einsum("ij,ij->j", residual, residual) / np.square(nodes.roots).sum()
    gap = base_k = np.zeros_like(base)
    if cases.resistance is not None:
        base_temperature, k_there = cases.temperatures(base)
        gap, base_k = base_temperature - cases.driving + cases.resistance * heat, base_k + k_there
        error += np.square(base_k * gap)
    return State(u, base, temperatures, loads, slope / k, residual, gap, base_k, heat, error)


def held_potential(nodes: Nodes, cases: Cases) -> Array:
    """Return the potential [W/m] of a held tip, zero where the tip is not held, shape (n_sets,)."""
    return cases.potential(cases.held) if nodes.conductance else np.zeros_like(cases.lowest)


def _start(nodes: Nodes, cases: Cases) -> State:
    base, roots = cases.potential(cases.driving), nodes.roots[:, None]
    weights = np.square(nodes.roots) / np.square(nodes.roots).sum()
    state = evaluate(nodes, cases, roots * (START * base + (1 - START) * held_potential(nodes, cases)), base)
    slope = weights @ state.slopes
    for _ in range(FITS):
        state = _on_line(nodes, cases, state, slope)
        potential, flux = state.u / roots, state.loads / roots
        about = potential - weights @ potential
        spread = weights @ np.square(about)
        slope = weights @ state.slopes
        np.divide(weights @ (about * flux), spread, out=slope, where=spread > 1e-6 * np.square(cases.span))
    return _on_line(nodes, cases, state, slope)


def _on_line(nodes: Nodes, cases: Cases, state: State, slope: Array) -> State:
    """Return a fin whose fluxes lie on a line of a slope [1/m] through the means of a state's own."""
    roots, held = nodes.roots[:, None], held_potential(nodes, cases)
    weights = np.square(nodes.roots) / np.square(nodes.roots).sum()
    level = weights @ (state.loads / roots) - slope * (weights @ (state.u / roots))
    shares = 1 / (nodes.rates[:, None] + slope)
    lift = nodes.modes.T @ nodes.lift[:, None]
    of_base = shares * nodes.rates[:, None] * lift
    of_rest = nodes.stiffness @ nodes.tip_lift[:, None] * held - roots * level
    of_rest = shares * (nodes.modes.T @ of_rest)
    base = cases.potential(cases.driving)
    if cases.resistance is not None:
        heat = (nodes.lift @ roots) * level - nodes.conductance * held + slope * (lift.T @ of_rest)[0]
        more = nodes.conductance + slope * (lift.T @ of_base)[0]
        bond = cases.resistance * state.base_conductivity
        base = (base - bond * heat) / (1 + bond * more)
    return evaluate(nodes, cases, nodes.modes @ (of_rest + of_base * base), base)


def _step(nodes: Nodes, cases: Cases, state: State) -> tuple[State, Array, Flags]:
    """Take one step; return the new state, how much it changed [1], and whether the step was whole."""
    right = -(nodes.stiffness @ state.residual).T[:, :, None]
    d_base: Array = np.zeros(right.shape[0])
    if cases.resistance is None:
        du = _solved(nodes, state.slopes, right)[0]
    else:
        of_base = np.broadcast_to((nodes.stiffness @ nodes.lift)[:, None], right.shape)
        parts = _solved(nodes, state.slopes, np.concatenate([right, of_base], axis=2))
        heats = nodes.lift @ (state.slopes * parts)
        more = 1 / state.base_conductivity + cases.resistance * (nodes.conductance + heats[1])
        d_base = -(state.gap + cases.resistance * heats[0]) / more
        du = parts[0] + d_base * parts[1]
    changes = np.abs(du / nodes.roots[:, None])[nodes.counted]
    size = np.maximum(changes.max(axis=0), np.abs(d_base)) / cases.span
    new = evaluate(nodes, cases, state.u + du, state.base + d_base)
    most = nodes.roots @ np.abs(new.loads) + nodes.conductance * cases.span
    size = np.maximum(size, np.abs(new.heat - state.heat) / np.maximum(most, TINY))
    worse = ~(new.error <= state.error) & (size > TOLERANCE)
    if worse.any():
        new = _halved(nodes, cases, state, (du, d_base), worse)
    return new, size, ~worse


def _solved(nodes: Nodes, slopes: Array, right: Array) -> Array:
    """Solve (C^-1 + D) w = right: slopes (n, n_sets), right (n_sets, n, n_right) -> (n_right, n, n_sets)."""
    n_sets, n, _ = right.shape
    found = np.empty(right.shape)
    at_a_time = max(1, ROOM // n**2)
    for start in range(0, n_sets, at_a_time):
        some = slice(start, start + at_a_time)
        diagonals = slopes.T[some]
        matrices = np.empty((len(diagonals), n, n))
        matrices[:] = nodes.stiffness
        matrices.reshape(len(diagonals), -1)[:, :: n + 1] += diagonals
        found[some] = np.linalg.solve(matrices, right[some])
    return found.T


def _halved(nodes: Nodes, cases: Cases, state: State, step: tuple[Array, Array], worse: Flags) -> State:
    """Halve the steps of the sets whose residuals would grow, until they fall or HALVINGS are used up."""
    share = np.where(worse, 0.5, 1.0)
    for _ in range(HALVINGS):
        new = evaluate(nodes, cases, state.u + share * step[0], state.base + share * step[1])
        worse = worse & ~(new.error <= state.error)
        if not worse.any():
            break
        share[worse] /= 2
    return new
