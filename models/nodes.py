"""A fin's side stood for by a few nodes: the equations on which non-linear fins are solved.

With Kirchhoff's potential Phi the fin equation (A Phi')' = P q is linear but for the flux q, and integrating
it twice from the tip gives Phi = Phi_b - S q, where

    (S q)(x) = integral from 0 to x of F/A,      F(x) = integral from x to L of P q, what crosses the section.

The flux along a fin is smooth where its shape is not: here it is a polynomial on each of one or a few pieces
of the length, by its values at the nodes of the Gauss rule whose weight is the side itself, P dx, so that a
node stands for w_j [m²] of side. Galerkin's projection on the same polynomials makes of S a small symmetric
matrix C_ij, the integral of F_i F_j/A, for u_i = w_i^1/2 Phi_i and loads p_i = w_i^1/2 q_i:

    u = Phi_b lift - C p,        base heat = lift . p,        lift_i = w_i^1/2.

C is positive definite, a flux that rises with temperature adds a positive diagonal to its inverse, and the
error of a heat falls with the square of that of the flux: 8 nodes give 3e-8 at m L = 3, 16 nodes 1e-10 at m L
= 10. A tip that loses heat is one more node, of area A(L), whose flux crosses every section. A tip that is
held takes from C what a straight fall of the potential would give, and adds a lift of its own.
"""

from dataclasses import dataclass, replace
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from finback.models.gauss import gauss
from finback.models.sides import Grid, Shape, grid

Array = NDArray[np.float64]

ACCURACY = 1e-6
"""Last coefficients of a linear flux, as potentials over their range [1], up to which a plan is taken."""
COUNTS = (4, 6, 8, 10, 12, 16, 20, 24, 32, 48)
"""Nodes [1] in one piece of the length."""
MOST_LAYERS, SPLITS, IN_PIECE = 9, (4, 8, 16), 24
"""Most layers at an end; equal pieces, where one is not enough; nodes in each layer and such piece [1]."""
IN_CELL = 12
"""Least nodes [1] in a piece where cells part the length."""
POWERS = (1.0, 0.5, 0.25, 0.125)
"""Powers of the distance from a sharp tip [1] in which the flux may be a polynomial."""
BLUNT_POWERS = (1.0, 0.0, 0.5, 0.25)
"""The same for a blunt tip; 0 stands for the limit, a logarithm: the resistance of what lies beyond."""
NEAR_SHARP_TIP = 1e-3
"""Share of the length at a sharp tip [1] where the error is not measured: heat may not reach the tip."""
FEW_PIECES = 4
"""Most layers and pieces [1] whose nodes are kept for good: below 1 MB; many take up to 30 MB."""
FEW_BREAKS = 6
"""Most breaks of a profile [1] that all part pieces; of more, only those where section or perimeter jump."""


@dataclass(frozen=True, slots=True)
class Plan:
    """How many nodes there are [1]: count in each piece, equal pieces, and layers at the ends.

    Each layer is a quarter as long as its neighbour, towards the base, and towards a tip that is driven.
    """

    count: int
    pieces: int = 1
    layers: int = 0

    def finer(self) -> "Plan | None":
        """Return the next plan that resolves more everywhere, None after the last one."""
        if self.pieces == 1 and not self.layers and self.count < COUNTS[-1]:
            return Plan(min(count for count in COUNTS if count > self.count))
        pieces = [pieces for pieces in SPLITS if pieces > self.pieces]
        return Plan(IN_PIECE, pieces[0], self.layers) if pieces else None

    def around_cells(self) -> "Plan":
        """Return the plan for the same fin where cells part its length."""
        return replace(self, count=max(self.count, IN_CELL))

    def far_finer(self) -> "Plan":
        """Return a plan that resolves several times as much everywhere: a kink makes errors fall slowly."""
        return Plan(IN_PIECE, SPLITS[self.count > IN_PIECE], self.layers)


PLANS = (*(Plan(count) for count in COUNTS), *(Plan(IN_PIECE, 1, n) for n in range(1, MOST_LAYERS + 1)))
"""Plans in rising order of how steep a temperature they resolve."""


@dataclass(frozen=True, slots=True)
class Nodes:
    """The equations of one geometry on n nodes; a tip's own node is the last one.

    places x/L [1] and roots w_i^1/2 [m] (n,); compliance C [m] and stiffness, its inverse [1/m], (n, n); lift
    and tip_lift [m] (n,), of the base and of a held tip; conductance [m] between held ends, otherwise zero;
    rates [1/m] (n,) and modes (n, n), eigenvalues and eigenvectors of the stiffness; counted (n,), whether a
    node lies where the error is measured; tails (n_tails, n): times the loads, the error of the potential as
    the last coefficients of the flux show it; largest [1/m], the slope of flux over potential that they
    resolve; fluxes (n_elements, q, n), F of each load on the grid, and functions (n_elements, q, n), the
    polynomials of the nodes.
    """

    places: Array
    roots: Array
    compliance: Array
    stiffness: Array
    lift: Array
    tip_lift: Array
    conductance: float
    rates: Array
    modes: Array
    counted: NDArray[np.bool_]
    tails: Array
    largest: float
    grid: Grid
    fluxes: Array
    functions: Array


@dataclass(frozen=True, slots=True)
class Responses:
    """What makes the potential at some places: Phi_b - share (Phi_b - Phi_tip) - fall . p + values . f.

    fall [m] and values [1/m], both (n_x, n); share [1] (n_x,). f is what is left of the equations: it is
    nothing when they hold, and keeps a small error of p from becoming a large one of Phi where m L is large.
    """

    fall: Array
    values: Array
    share: Array


def nodes(shape: Shape, plan: Plan) -> Nodes:
    """Return the nodes of a plan; what a shape needs is found once and kept, many nodes for some time."""
    few = not shape.cells and plan.layers + plan.pieces <= FEW_PIECES
    return _nodes(shape, plan) if few else _many_nodes(shape, plan)


@lru_cache(maxsize=256)
def _nodes(shape: Shape, plan: Plan) -> Nodes:
    return _build(shape, plan, _power(shape))


@lru_cache(maxsize=24)
def _many_nodes(shape: Shape, plan: Plan) -> Nodes:
    return _build(shape, plan, _power(replace(shape, cells=())))


@lru_cache(maxsize=256)
def responses(shape: Shape, plan: Plan, positions: bytes) -> Responses:
    """Return what the potential at positions x [m] (n_x,), as bytes, is made of."""
    found = nodes(shape, plan)
    places = np.frombuffer(positions) / shape.length
    values = found.grid.at(found.functions, places)
    fall = found.grid.fall(found.fluxes, places)
    if shape.tip != "held":
        return Responses(fall, values, np.zeros(len(places)))
    straight = found.grid.fall(found.grid.even, places)
    return Responses(fall - straight * found.tip_lift, values, straight[:, 0] * found.conductance)


@lru_cache(maxsize=64)
def _power(shape: Shape) -> float:
    """Return the power of the distance from the tip in which few nodes resolve most."""
    first, *others = BLUNT_POWERS if shape.tip_area > 0 else POWERS
    trial = Plan(24)
    best, reach = first, _build(shape, trial, first).largest
    for power in others:
        found = _build(shape, trial, power).largest
        if found > 1.5 * reach:
            best, reach = power, found
    return best


def _build(shape: Shape, plan: Plan, power: float) -> Nodes:
    count = plan.count
    fine = grid(shape, 28 if count <= 24 else 52, plan.pieces, plan.layers)
    beyond = fine.beyond(fine.resistance[:, :, None])[:, :, 0]
    coordinate = (1 - fine.places) ** power if power else beyond
    edges = _pieces(shape, fine, plan)
    rules = []
    functions = np.zeros((*fine.side.shape, count * (len(edges) - 1)))
    tails = np.zeros((2 * (len(edges) - 1), functions.shape[2]))
    for i, piece in enumerate(slice(*pair) for pair in pairwise(edges)):
        own = slice(i * count, (i + 1) * count)
        rule = gauss(coordinate[piece], fine.side[piece], count)
        functions[piece, :, own] = rule.functions
        tails[2 * i : 2 * i + 2, own] = rule.last
        rules.append(rule)
    points = np.concatenate([rule.points for rule in rules])
    places = 1 - points ** (1 / power) if power else _places_of(shape, fine, beyond, points)
    roots = np.concatenate([rule.roots for rule in rules])
    fluxes = fine.beyond(functions * fine.side[:, :, None])
    if shape.tip == "face":
        root = float(np.sqrt(shape.tip_area))
        places, roots, tails = np.append(places, 1.0), np.append(roots, root), np.pad(tails, ((0, 0), (0, 1)))
        fluxes = np.concatenate([fluxes, root * fine.even], axis=2)
        functions = np.concatenate([functions, 0 * fine.even], axis=2)
    found = _equations(shape, fine, fluxes, places, roots, tails)
    return replace(found, functions=functions)


def _pieces(shape: Shape, fine: Grid, plan: Plan) -> NDArray[np.intp]:
    """Return the elements at which pieces begin, and the number of elements as the last entry."""
    breaks = shape.breaks
    if len(breaks) > FEW_BREAKS:
        sides = breaks[:, None] + shape.length * 1e-9 * np.array([-1.0, 1.0])
        values = np.stack([shape.area(sides.ravel()), shape.perimeter(sides.ravel())]).reshape(2, -1, 2)
        jumps = np.abs(np.diff(np.log(values), axis=2)).max(axis=(0, 2)) > 1e-6
        jumps |= np.isin(breaks, shape.ends)
        breaks = breaks[jumps]
    quarters = 0.25 ** np.arange(1, plan.layers + 1)
    wanted = [np.linspace(0.0, 1.0, plan.pieces + 1), breaks / shape.length, quarters]
    if shape.tip != "free":
        wanted.append(1 - quarters)
    return np.unique(np.abs(fine.edges - np.concatenate(wanted)[:, None]).argmin(axis=1))


def _places_of(shape: Shape, fine: Grid, beyond: Array, points: Array) -> Array:
    """Return places x/L beyond which the resistance is that of points [1/m], by Newton's method."""
    falling = np.argsort(beyond.ravel())
    places = np.interp(points, beyond.ravel()[falling], fine.places.ravel()[falling])
    whole = float(fine.resistance.sum())
    for _ in range(4):
        error = whole - fine.fall(fine.even, places)[:, 0] - points
        places = np.clip(places + error * shape.area(places * shape.length) / shape.length, 0.0, 1.0)
    return places


def _equations(shape: Shape, fine: Grid, fluxes: Array, places: Array, roots: Array, tails: Array) -> Nodes:
    weighted = (np.sqrt(fine.resistance)[:, :, None] * fluxes).reshape(-1, len(roots))
    compliance = weighted.T @ weighted
    tip_lift, conductance = np.zeros_like(roots), 0.0
    if shape.tip == "held":
        conductance = 1 / float(fine.resistance.sum())
        tip_lift = np.einsum("eq,eqk->k", fine.resistance, fluxes) * conductance
        compliance -= np.outer(tip_lift, tip_lift) / conductance
    stiffness = np.linalg.inv(compliance)
    stiffness = (stiffness + stiffness.T) / 2
    rates, modes = np.linalg.eigh(stiffness)
    counted = places <= (1.0 if shape.tip_area > 0 else 1 - NEAR_SHARP_TIP)
    reach = np.abs(tails @ compliance / roots)[:, counted].max(axis=1)  # the potential of each coefficient
    found = Nodes(
        places,
        roots,
        compliance,
        stiffness,
        lift=roots - tip_lift,
        tip_lift=tip_lift,
        conductance=conductance,
        rates=rates,
        modes=modes,
        counted=counted,
        tails=tails * reach[:, None],
        largest=0.0,
        grid=fine,
        fluxes=fluxes,
        functions=fluxes,
    )
    driven = [found.lift] if shape.tip != "held" else [found.lift, tip_lift]
    return replace(found, largest=_largest(found, np.stack(driven, axis=1)))


def _largest(found: Nodes, lifts: Array) -> float:
    """Return the largest slope [1/m] at which a linear flux is resolved; lifts (n, n_lifts) of one unit."""
    slopes = found.rates[0] * np.logspace(-4, 10, 211)
    strengths = slopes * found.rates[:, None] / (found.rates[:, None] + slopes)
    loads = (found.modes.T @ lifts)[:, :, None] * strengths[:, None, :]
    errors = np.abs(np.tensordot(found.tails @ found.modes, loads, axes=1)).sum(axis=0).max(axis=0)
    resolved = np.flatnonzero(np.maximum.accumulate(errors) <= ACCURACY)
    return float(slopes[resolved[-1]]) if resolved.size else 0.0
