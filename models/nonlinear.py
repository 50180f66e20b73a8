"""Non-linear fins: k(T), free convection, radiation, h by the place; any profile, any tip.

Kirchhoff's potential makes conduction linear, `nodes` makes of it a few equations, and `iteration` solves
those of a whole block of parameter sets by Newton's method. Here a fin is put into that form. Its nodes are
chosen by how steep its potential can be; the solution is then carried over to finer nodes, and goes on from
there in those sets that would change. A power law whose excess temperature changes sign along the fin, or a
conductivity table with a point among the fin's temperatures, is a kink in the flux: it needs more nodes, the
first one of them around its place (`kinks`).
"""

from collections.abc import Iterator
from dataclasses import dataclass, fields, is_dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback.models import iteration, kinks
from finback.models.conductivity import Conductivity, ConstantConductivity, constant
from finback.models.coupling import require_tip, within
from finback.models.endless import EndlessFin, settled
from finback.models.ends import Base, ConvectiveTip, FixedTip, InfiniteTip, Joint
from finback.models.fin import Fin
from finback.models.iteration import TINY, Cases, EndLaw, State, held_potential, take
from finback.models.nodes import PLANS, Nodes, Plan, nodes, responses
from finback.models.profiles import Uniform
from finback.models.sides import Shape
from finback.models.solution import Solution
from finback.models.surface import UniformCoefficient

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]
Rows = NDArray[np.intp]
Values = float | Array

STEPS = 60
"""Most steps of Newton's method [1] on one set of nodes unless another is asked for; three are usual."""
BLOCK = 512
"""Sets solved at a time [1]: their equations stay in the processor's cache."""
POTENTIAL_ACCURACY, HEAT_ACCURACY = 1e-7, 1e-8
"""Changes of a potential, over its range, and of a heat [1] by finer nodes up to which a set is done."""
NO_HEAT = 1e-6
"""Share [1] of what a fin between held ends could conduct that counts as no heat."""
SLACK = 100.0
"""Times these accuracies [1] that the finest nodes may change a set that counts as converged."""
ROUNDING = 10.0
"""Times the residual of a solved fin [1] that rounding may be of the potential beside its nodes."""
CLOSER = 0.5
"""Share of these accuracies [1] to which a set with a kink has to keep."""
ENOUGH = 24
"""Nodes [1] on which a kink that they do not resolve is well enough known to be put into a cell."""

PROFILE = ("length", "area", "perimeter", "side_area")
LAW = ("linear", "uniform", "flux", "response", "sinks")
"""What a `Profile` and a `SurfaceLaw` have, asked for by name: asking a protocol takes 30 times as long."""


def applies(fin: Fin) -> bool:
    """Tell whether this module can solve the fin: any profile with any surface law."""
    members = ((fin.profile, PROFILE), (fin.surface, LAW))
    return all(hasattr(part, name) for part, names in members for name in names)


def solve(fin: Fin, base: Base, air: Values, x: Array, steps: int = STEPS) -> Solution:
    """Solve a block of fins of any one shape, surface law and conductivity law.

    Arguments: fin; base, its temperature or a joint; air temperature [K]; x, positions [m] of shape (n_x,), 0
    at the base; steps, most steps of Newton's method. Temperatures are absolute where something radiates.
    Returns a `Solution` of n_sets rows. Where `converged`, temperatures are right to 1e-6 of their range and
    heats to 1e-6, usually to 1e-8 and 1e-10; any other row holds the last step. Raises TypeError for what is
    no profile or no surface law, ValueError for a tip that the shape cannot have, a position outside the fin,
    a temperature that is not absolute, and a conductivity that is not positive where the fin may be.
    """
    if not applies(fin):
        raise TypeError(f"no solver for {type(fin.profile).__name__} with {type(fin.surface).__name__}")
    if not isinstance(fin.profile, Uniform):
        require_tip(fin.profile, fin.tip)
    shape = _shape(fin)
    cases = _cases(fin, base, air, shape)
    positions = np.append(within(fin.profile, np.asarray(x, dtype=np.float64)), fin.profile.length)
    answer = _Answer.empty(len(cases.lowest), positions)
    steep = _steepest(cases)
    waiting = np.arange(len(steep))
    for plan in PLANS:
        system = nodes(shape, plan)
        fits = ~(steep[waiting] > system.largest) | (plan is PLANS[-1])
        ready, waiting = waiting[fits], waiting[~fits]
        for start in range(0, len(ready), BLOCK):
            rows = ready[start : start + BLOCK]
            some = cases if len(rows) == len(steep) else take(cases, rows)
            with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
                _solve_block(_Block(shape, plan, system, some, rows), steps, answer)
        if not waiting.size:
            break
    return answer.solution()


def _shape(fin: Fin) -> Shape:
    shape = Shape(fin.profile, tuple(getattr(fin.surface, "breaks", ())), "free")
    if isinstance(fin.tip, FixedTip):
        return replace(shape, tip="held")
    loses = isinstance(fin.tip, ConvectiveTip | InfiniteTip) and shape.tip_area > 0
    return replace(shape, tip="face") if loses else shape


def _cases(fin: Fin, base: Base, air: Values, shape: Shape) -> Cases:
    """Return what differs from set to set; refuse temperatures and conductivities that make no sense."""
    k, tip = fin.conductivity, fin.tip
    number = constant(k)
    if number is not None:
        law: Conductivity = ConstantConductivity(number)
    elif isinstance(k, Conductivity):
        law = k
    else:
        raise TypeError(f"{type(k).__name__} is no conductivity: it needs at, potential and temperature")
    driving = base.plate_temperature if isinstance(base, Joint) else base.temperature
    held = tip.temperature if isinstance(tip, FixedTip) else air
    n_sets = max(_count(part) for part in (law, fin.surface, tip, base, air))
    ends = [np.broadcast_to(value, n_sets) for value in (driving, held, air, *fin.surface.sinks(air))]
    low, high = np.min(ends, axis=0), np.max(ends, axis=0)
    if hasattr(fin.surface, "radiation") and bool(np.any(low <= 0)):
        raise ValueError(f"temperatures must be absolute where a fin radiates, got {float(low.min())} K")
    for temperature in (low, high):
        _require_conducting(law, temperature)
    return Cases(
        conductivity=law,
        surface=fin.surface,
        tip=_tip_law(fin, law, air, n_sets) if shape.tip == "face" else None,
        air=air,
        driving=driving,
        held=held,
        resistance=base.resistance / float(shape.area(np.zeros(1))[0]) if isinstance(base, Joint) else None,
        lowest=np.broadcast_to(law.potential(low, air), n_sets),
        highest=np.broadcast_to(law.potential(high, air), n_sets),
    )


def _count(value: object) -> int:
    """Return the number of sets of a value, or of the values of a frozen dataclass."""
    if isinstance(value, np.ndarray):
        return value.size if value.ndim == 1 else 1
    if not is_dataclass(value) or isinstance(value, type):
        return 1
    return max((_count(getattr(value, field.name)) for field in fields(value)), default=1)


def _require_conducting(law: Conductivity, temperature: Array) -> None:
    k = np.broadcast_to(law.at(temperature), temperature.shape)
    wrong = k <= 0
    if bool(wrong.any()):
        place = f"{float(k[wrong][0])} W/(m K) at {float(temperature[wrong][0])} K"
        raise ValueError(f"the conductivity must be positive wherever the fin may be, got {place}")


def _tip_law(fin: Fin, conductivity: Conductivity, air: Values, n_sets: int) -> EndLaw | None:
    """Return the law of a tip's face where it is not the side's."""
    if isinstance(fin.tip, ConvectiveTip):
        return None if fin.tip.coefficient is None else UniformCoefficient(fin.tip.coefficient)
    end = np.array([fin.profile.length])
    ratio = float(fin.profile.perimeter(end)[0] / fin.profile.area(end)[0])
    return EndlessFin(fin.surface, conductivity, settled(fin.surface, air, n_sets), ratio)


def _steepest(cases: Cases) -> Array:
    """Return the largest slope of flux over potential [1/m] that each set may have."""
    places = np.unique([0.0, 0.5, 1.0, *getattr(cases.surface, "breaks", ())])[:, None]
    found = np.zeros_like(cases.lowest)
    for potential in (cases.lowest, cases.highest):
        temperature, k = cases.temperatures(potential)
        _, slope = cases.surface.response(temperature + 0 * places, cases.air, places)
        found = np.fmax(found, (slope / k).max(axis=0))
    return found


@dataclass(frozen=True, slots=True)
class _Block:
    """Some sets of one shape, the plan of their nodes and these, and the sets' rows in the answer."""

    shape: Shape
    plan: Plan
    nodes: Nodes
    cases: Cases
    rows: Rows

    def take(self, rows: Rows) -> "_Block":
        """Return some of the sets."""
        return _Block(self.shape, self.plan, self.nodes, take(self.cases, rows), self.rows[rows])


@dataclass(frozen=True, slots=True)
class _Stand:
    """A block and the state that it is in."""

    block: _Block
    state: State

    @property
    def tip_held(self) -> bool:
        """Whether the tip is held at a temperature."""
        return bool(self.block.nodes.conductance)

    def heats(self) -> Array:
        """Return what enters the base and what side and tip's face lose [W], shape (2, n_sets)."""
        return np.stack([self.state.heat, self.block.nodes.roots @ self.state.loads])

    def take(self, rows: Rows) -> "_Stand":
        """Return some of the sets."""
        return _Stand(self.block.take(rows), self.state.take(rows))

    def potential(self, positions: Array) -> Array:
        """Return the potential [W/m] at positions [m], shape (n_x, n_sets)."""
        block, state = self.block, self.state
        at = responses(block.shape, block.plan, positions.tobytes())
        across = state.base - held_potential(block.nodes, block.cases)
        integrated = state.base - at.share[:, None] * across - at.fall @ state.loads
        if not block.nodes.grid.cold_tip:
            return np.asarray(integrated + at.values @ state.residual)
        # Near a tip that heat does not reach rounding is large, and the residual is nothing else: there the
        # polynomials through the nodes are better than the integral of their fluxes.
        through_nodes = at.values @ state.u
        beside = integrated + at.values @ state.residual - through_nodes
        rounding = ROUNDING * (np.abs(at.values) @ np.abs(state.residual))
        return np.asarray(through_nodes + np.sign(beside) * np.maximum(np.abs(beside) - rounding, 0.0))

    def passes(self, levels: tuple[Values, ...]) -> Flags:
        """Tell in which sets one of several temperatures [K] lies within the fin, shape (n_sets,)."""
        if not levels:
            return np.zeros(len(self.block.rows), dtype=np.bool_)
        held = self.tip_held
        ends = np.stack([self.state.base] + [held_potential(self.block.nodes, self.block.cases)] * held)
        known = np.vstack([self.state.temperatures, self.block.cases.temperatures(ends)[0]])
        return kinks.passed(known, levels, held)

    def on(self, plan: Plan, cells: tuple[float, ...] = ()) -> "_Stand":
        """Return the block with its potential on other nodes; cells, those that its shape is to have."""
        shape = replace(self.block.shape, cells=cells) if cells else self.block.shape
        there, cases = nodes(shape, plan), self.block.cases
        u = there.roots[:, None] * self.potential(there.places * shape.length)
        block = _Block(shape, plan, there, cases, self.block.rows)
        return _Stand(block, iteration.evaluate(there, cases, u, self.state.base))

    def misfit(self, other: "_Stand") -> Array:
        """Return how much [1] other nodes, on which the block has been put, might change, over what may be.

        It would be less than the residual there, and much less where m L is large.
        """
        return other.measure(other.state.residual, other.heats() - self.heats())

    def measure(self, u: Array, heats: Array) -> Array:
        """Return how large differences of u [W] and of heats [W] are [1], over what is accurate."""
        system, span, state = self.block.nodes, self.block.cases.span, self.state
        potential = np.abs(u / system.roots[:, None])[system.counted].max(axis=0) / span
        most = np.maximum(system.roots @ np.abs(state.loads), np.abs(state.heat))
        least = np.maximum(NO_HEAT * system.conductance * span, TINY)  # of a fin held at one temperature
        heat = np.abs(heats).max(axis=0) / np.maximum(most, least)
        return np.asarray(np.maximum(potential / POTENTIAL_ACCURACY, heat / HEAT_ACCURACY))


def _solve_block(
    block: _Block, steps: int, answer: "_Answer", start: State | None = None, coarser: Array | None = None
) -> None:
    """Solve a block on the nodes of its plan, and its sets that finer nodes would change on those.

    Arguments beside block, most steps and answer: of coarser nodes, if some have been solved, start, their
    potential on these nodes, from which the first step sets out, and coarser, their heats [W].
    """
    state, converged = iteration.solve(block.nodes, block.cases, steps, start)
    stand, finer = _Stand(block, state), block.plan.finer()
    answer.fill(stand, converged)
    heats = stand.heats()
    if finer is None:
        if start is not None and coarser is not None:
            change = stand.measure(state.u - start.u, heats - coarser)
            answer.converged[block.rows] = converged & (change <= SLACK)
        return
    carried = stand.on(finer)
    rough = converged & _changing(stand, carried)
    for parted, rows in _parted_at_kinks(stand, rough):
        _solve_block(parted.block, steps, answer, parted.state, heats[:, rows])
        rough[rows] = False
    rows = np.flatnonzero(rough)
    if rows.size:
        carried = carried.take(rows)
        _solve_block(carried.block, steps, answer, carried.state, heats[:, rows])


def _changing(stand: _Stand, carried: _Stand) -> Flags:
    """Tell which sets finer nodes, on which they have been put, would change too much.

    Errors of a kink fall slowly, and the next nodes may agree by chance: a set that has one has to keep
    closer, and is looked at again on far finer nodes.
    """
    misfit, cases, plan = stand.misfit(carried), stand.block.cases, stand.block.plan
    rough = np.asarray(~(misfit <= 1))
    strong = () if stand.block.shape.cells else kinks.of_side(cases, stand.tip_held)
    kinked = stand.passes((*strong, *kinks.of_solid(cases)))
    rough |= kinked & ~(misfit <= CLOSER)
    rows = np.flatnonzero(kinked & ~rough)
    if rows.size and plan.pieces == 1:
        some = stand.take(rows)
        rough[rows] = ~(some.misfit(some.on(plan.far_finer())) <= CLOSER)
    return rough


def _parted_at_kinks(stand: _Stand, rough: Flags) -> Iterator[tuple[_Stand, Rows]]:
    """Yield the rough sets whose side has a kink on nodes with cells around it."""
    block = stand.block
    if block.plan.pieces > 1 or block.plan.count < ENOUGH or block.shape.cells:
        return
    rows = np.flatnonzero(rough & stand.passes(kinks.of_side(block.cases, stand.tip_held)))
    some = stand.take(rows)
    levels = kinks.of_side(some.block.cases, stand.tip_held)
    temperatures = some.block.cases.temperatures(some.potential(kinks.PLACES * block.shape.length))[0]
    for cells, own in kinks.cells(temperatures, levels):
        yield some.take(own).on(block.plan.around_cells(), cells), rows[own]


@dataclass(frozen=True, slots=True)
class _Answer:
    """A solution that is filled block by block; the last of its positions is the tip's."""

    positions: Array
    temperatures: Array
    base_temperature: Array
    base_heat: Array
    tip_heat: Array
    radiated_heat: Array
    converged: NDArray[np.bool_]

    @classmethod
    def empty(cls, n_sets: int, positions: Array) -> "_Answer":
        base, heat, tip, radiated = np.zeros((4, n_sets))
        found = np.zeros((n_sets, len(positions)))
        return cls(positions, found, base, heat, tip, radiated, np.zeros(n_sets, dtype=np.bool_))

    def fill(self, stand: _Stand, converged: Flags) -> None:
        """Write the sets of a block."""
        block, state = stand.block, stand.state
        rows, cases, system = block.rows, block.cases, block.nodes
        self.converged[rows] = converged
        self.temperatures[rows] = cases.temperatures(stand.potential(self.positions))[0].T
        if system.grid.cold_tip:
            very_tip = np.flatnonzero(self.positions >= block.shape.length)
            losing = np.abs(state.loads).max(axis=0) > 0
            fallen = settled(cases.surface, cases.air, len(rows))[losing, None]
            self.temperatures[np.ix_(rows[losing], very_tip)] = fallen
        self.base_temperature[rows] = cases.temperatures(state.base)[0]
        self.base_heat[rows] = state.heat
        if block.shape.tip == "held":
            across = state.base - held_potential(system, cases)
            self.tip_heat[rows] = system.conductance * across - system.tip_lift @ state.loads
        elif block.shape.tip == "face":
            self.tip_heat[rows] = system.roots[-1] * state.loads[-1]
        self.radiated_heat[rows] = _radiated(system, cases, state)

    def solution(self) -> Solution:
        return Solution(
            temperatures=self.temperatures[:, :-1],
            base_temperature=self.base_temperature,
            base_heat=self.base_heat,
            tip_temperature=self.temperatures[:, -1],
            tip_heat=self.tip_heat,
            converged=self.converged,
            radiated_heat=self.radiated_heat,
        )


def _radiated(system: Nodes, cases: Cases, state: State) -> Values:
    """Return what the side radiates [W], and the tip's face where it follows the law of the side."""
    radiation = getattr(cases.surface, "radiation", None)
    if radiation is None:
        return 0.0
    flux = radiation(state.temperatures, cases.air)
    if cases.tip is not None:
        flux[-1] = 0.0
    return np.asarray(np.square(system.roots) @ flux)
