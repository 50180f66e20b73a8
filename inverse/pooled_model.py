"""The model of a pooled estimate: what each run has of its own, what all runs share, and their readings.

Readings of run r:  y = f(w_r, s) + E_r u + noise, with w_r the run's own unknowns, s the shared ones and u
what else all runs have in common: the errors of the thermometers, of the holes and of the lengths, and the
levels about which own unknowns lie, each in standard uncertainties. Noise is independent from reading to
reading. Heaters that only bound the heat, and what own unknowns are beforehand, are further rows of the same
kind, so that all that follows is linear algebra with rows.

Runs that read the same sensors stand in one group, and a group is predicted in one block.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback import posing
from finback.parameters import DEFAULT_PRIORS, Parameter
from finback.pooled_runs import Pool, Row
from finback.posing import LENGTH_STEP, SMALLEST_NOISE, uncertain_lengths
from finback.problem import Candidate, Problem
from finback.rig import Rig, Sensor

Array = NDArray[np.float64]

OWN_SHARE = 0.1
"""Share of the variance of a stated calibration that each sensor has for its own; the rest is common to all
sensors of its place. A rig states one error of all sensors of a kind: thermocouples of one spool on one
instrument. A tenth makes a third of it each sensor's own (0.32), and the whole is as stated."""

ErrorKind = Literal["common", "own", "position", "length", "level"]
BEND = 1.0  # K, or per cent: steps of differences of effects
SMALLEST_SHARE = 0.3  # of a heat that is read, at which a noise in per cent is taken at the least
TEMPERATURE = 500.0  # K, half a width of what a rig of one temperature may have


@dataclass(frozen=True, slots=True)
class SharedError:
    """One error or level that all runs share: its kind, and the sensor, place, length or unknown it is of."""

    kind: ErrorKind
    name: str


def _nothing() -> Array:
    return np.zeros(0)


@dataclass(frozen=True)
class Group:
    """Runs that read the same sensors.

    `problem`: the candidate posed on one of them, None where they are of one temperature throughout, with
    holes and lengths where they are thought to be, and `stated`, where the rig has them; `runs`
    (R,), their numbers; `values` (R, n) [K, W]; `variances` (R, n) of their noise, 0 where that is
    estimated, `estimated` (n,); `fixed`, what is exactly known in each run, (R,) by name; `bound_values`,
    `bound_sds` (R, b) [W]; `calibrations` (R, n), the stated common errors [K, W]; `own`, the run's own
    unknowns; `own_sds` (p,), what they scatter about their level by; `shared`, for each shared unknown that
    the problem has, its place there and among all shared ones; `errors` (R, N, m), what each of m shared
    errors does to each of the N rows for one standard uncertainty, at own unknowns `anchor` (R, p) and shared
    ones `anchor_shared` (q,) and errors `anchor_errors` (m,), and `bends` (R, n, p + q, m), how that changes
    with own and shared unknowns.
    """

    problem: Problem | None
    stated: Problem | None
    sensors: tuple[Sensor, ...]
    runs: NDArray[np.intp]
    values: Array
    variances: Array
    estimated: NDArray[np.bool_]
    fixed: Mapping[str, Array]
    bound_values: Array
    bound_sds: Array
    calibrations: Array
    own: tuple[Parameter, ...]
    own_sds: Array
    places: NDArray[np.intp]
    shared: tuple[tuple[int, int], ...]
    errors: Array = field(default_factory=_nothing)
    anchor: Array = field(default_factory=_nothing)
    anchor_shared: Array = field(default_factory=_nothing)
    anchor_errors: Array = field(default_factory=_nothing)
    bends: Array = field(default_factory=_nothing)

    @property
    def size(self) -> int:
        """Number of runs."""
        return len(self.runs)

    @property
    def rows(self) -> int:
        """Number of rows N: readings, bounds, own unknowns beforehand."""
        return int(self.values.shape[1] + self.bound_values.shape[1] + len(self.own))

    @cached_property
    def own_means(self) -> Array:
        """Means of the own unknowns beforehand (p,)."""
        return np.array([parameter.prior.mean for parameter in self.own])

    @cached_property
    def widths(self) -> Array:
        """Steps of differences in own unknowns (p,)."""
        return np.minimum(1e-3 * self.own_sds, 1e-4)

    @cached_property
    def targets(self) -> Array:
        """What the rows are compared with (R, N)."""
        size = self.size
        bounds = np.zeros(self.bound_values.shape)
        return np.concatenate([self.values, bounds, np.tile(self.own_means, (size, 1))], axis=1)

    @cached_property
    def weights(self) -> Array:
        """Weights of the rows (R, N): one over their variance, as at a sigma of 1 K where it is estimated."""
        of_readings = 1 / np.where(self.estimated, 1.0, np.maximum(self.variances, SMALLEST_NOISE**2))
        bounds = np.ones(self.bound_values.shape)
        own = np.tile(self.own_sds**-2, (self.size, 1))
        return np.concatenate([of_readings, bounds, own], axis=1)

    @cached_property
    def seen(self) -> tuple[Array, Array]:
        """What all rows tell of shared errors (m, m): those with a stated noise, and the others at 1 K."""
        weights = np.broadcast_to(np.sqrt(self.weights)[..., None], self.errors.shape)
        scaled = self.errors * weights
        parts = [
            scaled[:, at].reshape(-1, scaled.shape[2]) for at in (~self.are_estimated, self.are_estimated)
        ]
        return parts[0].T @ parts[0], parts[1].T @ parts[1]

    @cached_property
    def are_estimated(self) -> NDArray[np.bool_]:
        """Which rows (N,) have an estimated noise."""
        rest = np.zeros(self.rows - len(self.estimated), dtype=bool)
        return np.concatenate([self.estimated, rest])

    def vectors(self, w: Array, s: Array) -> Array:
        """Return the problem's parameter vectors (sets, P) of own (sets, p) and shared unknowns (sets, q)."""
        assert self.problem is not None, "runs of one temperature have none"
        z = np.zeros((len(w), len(self.problem.parameters)))
        z[:, self.places] = w
        for place, among in self.shared:
            z[:, place] = s[:, among]
        return z

    def by_name(self, w: Array, s: Array, runs: NDArray[np.intp]) -> dict[str, float | Array]:
        """Return values by name, SI units, for sets that belong to these runs of the group (sets,)."""
        assert self.problem is not None, "runs of one temperature have none"
        values = self.problem.values(self.vectors(w, s))
        values.update({name: each[runs] for name, each in self.fixed.items()})
        return values

    def predict(self, w: Array, s: Array, runs: NDArray[np.intp]) -> Array:
        """Predict all rows but those of own unknowns: (sets, p), (sets, q), (sets,) -> (sets, n + b)."""
        if self.problem is None:
            return np.tile(w, (1, self.values.shape[1]))
        n = self.values.shape[1]
        found = self.problem.predict_values(self.by_name(w, s, runs), len(w))
        if found.shape[1] == n:
            return found
        from scipy.special import log_ndtr

        margins = (self.bound_values[runs] - found[:, n:]) / self.bound_sds[runs]
        return np.concatenate([found[:, :n], np.sqrt(-2 * log_ndtr(margins))], axis=1)


@dataclass(frozen=True)
class Model:
    """A candidate posed on all runs of a pool.

    `groups`; `shared`, the unknowns that all runs share, the noise last where it is estimated; `errors`, what
    else they share; `tilt` (m,), by how much the curvature in own unknowns favours larger ones [nats for one
    standard uncertainty], 0 where that is left out; `lean` (q + m,), by how much shared unknowns and errors
    are favoured as the runs are spread as they are and not as wide as wide priors have it, counted from
    `lean_from` (q + m,).
    """

    rig: Rig
    candidate: Candidate
    groups: tuple[Group, ...]
    shared: tuple[Parameter, ...]
    noise_estimated: bool
    errors: tuple[SharedError, ...]
    tilt: Array
    lean: Array
    lean_from: Array

    @property
    def n_physical(self) -> int:
        """Number of shared unknowns but the noise."""
        return len(self.shared) - self.noise_estimated

    @property
    def is_linear(self) -> bool:
        """Whether all fins are quick to solve."""
        return all(group.problem is None or group.problem.is_linear for group in self.groups)

    def linearised(self, w: Sequence[Array], s: Array, u: Array) -> "Model":
        """Return the model with the effects of shared errors taken at a point.

        Arguments: own unknowns (R, p) of each group, shared ones s (q,) and errors u (m,). Holes and lengths
        are moved to where these have them, so that what is linear is only the way on from there.
        """
        kinds = [error.kind for error in self.errors]
        moved = np.where(np.isin(kinds, ("position", "length")), u, 0.0)
        groups = []
        for group, own in zip(self.groups, w, strict=True):
            there = replace(group, problem=_displaced(self, group, moved), anchor_errors=moved)
            at = _at_predicted(there, own, s)
            bends = _bends(self, at, own, s)
            effects = _effects(self, at, own, s)
            groups.append(replace(at, errors=effects, bends=bends, anchor=own, anchor_shared=s))
        return replace(self, groups=tuple(groups))


def pose(pool: Pool, candidate: Candidate) -> Model:
    """Return the model of a candidate on all runs of a pool; shared errors have no effects yet."""
    rig = pool.rig
    order = {row.name: number for number, row in enumerate(pool.rows)}
    grouped: dict[tuple[bool, frozenset[str]], list[Row]] = {}
    for row in (*pool.used("run"), *pool.used("calibration")):
        isothermal = row.use == "calibration"
        read = frozenset(
            name for name in row.readings.values if not isothermal or rig.sensors[name].reads_temperature
        )
        grouped.setdefault((isothermal, read), []).append(row)
    posed: list[tuple[Problem | None, Sequence[Row]]] = []
    shared: dict[str, Parameter] = {}
    estimated = False
    for (isothermal, _), rows in grouped.items():
        if isothermal:
            posed.append((None, rows))
            continue
        problem = posing.pose(rig, rows[0].readings, _possible(candidate, rig, rows[0]))
        estimated |= problem.noise.estimated
        shared |= {p.name: p for p in problem.parameters if p.name in pool.share}
        posed.append((problem, rows))
    names = [name for name in pool.share if name in shared]
    groups = [
        _isothermal_group(rig, rows, order) if problem is None else _group(rig, problem, rows, order, names)
        for problem, rows in posed
    ]
    estimated |= any(bool(group.estimated.any()) for group in groups)
    unknowns = [shared[name] for name in names]
    if estimated:
        unknowns.append(Parameter("noise", DEFAULT_PRIORS["noise"][1]))
    errors = tuple(_shared_errors(rig, groups))
    m, q = len(errors), len(names)
    nothing = np.zeros(q + m)
    return Model(
        rig, candidate, tuple(groups), tuple(unknowns), estimated, errors, nothing[q:], nothing, nothing
    )


def _possible(candidate: Candidate, rig: Rig, row: Row) -> Candidate:
    """Return the candidate as it is in runs with these readings: no joint is seen where no plate is read."""
    plates = any(sensor.name in row.readings.values for sensor in rig.sensors_on("plate"))
    return candidate if plates else replace(candidate, joint=False, joint_possible=False)


def _group(
    rig: Rig, problem: Problem, rows: Sequence[Row], order: Mapping[str, int], names: Sequence[str]
) -> Group:
    measured = problem.measured
    values = _values(rows, measured.sensors)
    bound_values = _values(rows, measured.bounds)
    noise = [np.hypot(*_random_and_common(s, bound_values[:, i])) for i, s in enumerate(measured.bounds)]
    exact: dict[str, Array] = {}
    for sensor in rig.sensors.values():
        if sensor.exactly_known and sensor.place in problem.fixed and sensor.name in rows[0].readings.values:
            exact[sensor.place] = _values(rows, (sensor,))[:, 0]
    if "reference_excess" in problem.fixed:
        exact["reference_excess"] = np.array([posing.reference_excess(rig, row.readings) for row in rows])
    places = [i for i, p in enumerate(problem.parameters) if p.name not in names and p.name not in ("noise",)]
    own = tuple(problem.parameters[i] for i in places)
    read: set[str] = {sensor.place for sensor in measured.sensors}
    variances, estimated, calibrations = _noise(measured.sensors, values)
    return Group(
        problem=problem,
        stated=problem,
        sensors=measured.sensors,
        runs=np.array([order[row.name] for row in rows]),
        values=values,
        variances=variances,
        estimated=estimated,
        calibrations=calibrations,
        fixed=exact,
        bound_values=bound_values,
        bound_sds=np.stack(noise, axis=1) if noise else np.zeros((len(rows), 0)),
        own=own,
        own_sds=np.array([p.prior.sd / _split(p, read) for p in own]),
        places=np.array(places, dtype=np.intp),
        shared=tuple((problem.names.index(n), i) for i, n in enumerate(names) if n in problem.names),
    )


def _isothermal_group(rig: Rig, rows: Sequence[Row], order: Mapping[str, int]) -> Group:
    read = rows[0].readings.values
    sensors = tuple(s for s in rig.sensors.values() if s.reads_temperature and s.name in read)
    values = _values(rows, sensors)
    temperature = Parameter("air", DEFAULT_PRIORS["air"][1])
    variances, estimated, calibrations = _noise(sensors, values)
    return Group(
        problem=None,
        stated=None,
        sensors=sensors,
        runs=np.array([order[row.name] for row in rows]),
        values=values,
        variances=variances,
        estimated=estimated,
        calibrations=calibrations,
        fixed={},
        bound_values=np.zeros((len(rows), 0)),
        bound_sds=np.zeros((len(rows), 0)),
        own=(temperature,),
        own_sds=np.array([TEMPERATURE]),
        places=np.zeros(1, dtype=np.intp),
        shared=(),
    )


def _values(rows: Sequence[Row], sensors: Sequence[Sensor]) -> Array:
    found = [[row.readings.values[sensor.name] for sensor in sensors] for row in rows]
    return np.array(found, dtype=np.float64).reshape(len(rows), len(sensors))


def _random_and_common(sensor: Sensor, values: Array) -> tuple[Array, Array]:
    """Return random and common standard uncertainty [K or W] of a sensor's readings (R,); nan: estimated."""
    if sensor.noise_relative is not None:
        random = sensor.noise_relative * np.abs(values)
    else:
        stated = np.nan if sensor.noise is None else max(sensor.noise, SMALLEST_NOISE)
        random = np.full(len(values), stated)
    return random, np.array([sensor.calibration_at(float(value)) for value in values])


def _noise(sensors: Sequence[Sensor], values: Array) -> tuple[Array, NDArray[np.bool_], Array]:
    """Return variances of the noise (R, n), which sensors' is estimated (n,), and common errors (R, n)."""
    parts = [_random_and_common(sensor, values[:, i]) for i, sensor in enumerate(sensors)]
    random = np.stack([part[0] for part in parts], axis=1)
    estimated = np.isnan(random).any(axis=0)
    common = np.stack([part[1] for part in parts], axis=1)
    return np.where(estimated, 0.0, np.square(random)), np.asarray(estimated, dtype=bool), common


def _at_predicted(group: Group, w: Array, s: Array) -> Group:
    """Return the group with the errors that are a share of a reading as at what is predicted for it.

    With shares of the readings themselves low ones would count for more than high ones: twice the square of
    a noise of 3 % makes a bias of 0.2 %, which no number of runs averages out.
    """
    if not any(s.noise_relative is not None or s.calibration_relative is not None for s in group.sensors):
        return group
    runs = np.arange(group.size)
    predicted = group.predict(w, _repeated(s, group.size), runs)[:, : group.values.shape[1]]
    variances, _, calibrations = _noise(group.sensors, np.where(np.isfinite(predicted), predicted, 0.0))
    relative = np.array([sensor.noise_relative is not None for sensor in group.sensors])
    floor = SMALLEST_SHARE * np.abs(group.values)  # of a heat that a step has lost sight of
    relative_sd = [sensor.noise_relative or 0.0 for sensor in group.sensors]
    least = np.square(floor * relative_sd)
    found = np.where(relative, np.maximum(variances, least), group.variances)
    shared = np.array([sensor.calibration_relative is not None for sensor in group.sensors])
    return replace(group, variances=found, calibrations=np.where(shared, calibrations, group.calibrations))


def _displaced(model: Model, group: Group, moved: Array) -> Problem | None:
    """Return the problem of a group with its holes and lengths moved by standard uncertainties (m,)."""
    problem = group.stated
    if problem is None or not moved.any():
        return problem
    by = {(error.kind, error.name): float(each) for error, each in zip(model.errors, moved, strict=True)}
    geometry = {
        name: replace(quantity, value=quantity.value + by.get(("length", name), 0.0) * quantity.sd)
        for name, quantity in problem.rig.geometry.items()
    }
    rig = replace(problem.rig, geometry=geometry)
    sensors = tuple(
        sensor
        if sensor.position is None
        else replace(sensor, position=_inside(rig, sensor, by.get(("position", sensor.name), 0.0)))
        for sensor in problem.measured.sensors
    )
    return replace(problem, rig=rig, measured=replace(problem.measured, sensors=sensors))


def _inside(rig: Rig, sensor: Sensor, moved: float) -> float:
    """Return where a sensor is that is moved by standard uncertainties, inside the fin [m]."""
    assert sensor.position is not None, "only holes move"
    return min(max(sensor.position + moved * sensor.position_sd, 0.0), rig.length)


def _has_level(parameter: Parameter, read: set[str]) -> bool:
    """Tell whether runs may have something in common in an own unknown that nothing reads.

    Were what is known of it beforehand taken as independent from run to run, a thousand wide priors would
    make a narrow one of their mean.
    """
    return parameter.name not in ("plate", "base_temperature") and parameter.name not in read


def _split(parameter: Parameter, read: set[str]) -> float:
    """Return by what to divide a prior's width: half of a stated variance is its level's, half the run's own.

    A wide prior stays as wide, and its level is so too.
    """
    return np.sqrt(2.0) if parameter.stated and _has_level(parameter, read) else 1.0


def _shared_errors(rig: Rig, groups: Sequence[Group]) -> list[SharedError]:
    """Return the errors and levels that the runs of these groups share, in a fixed order."""
    read = {
        sensor.name: sensor
        for group in groups
        for i, sensor in enumerate(group.sensors)
        if group.calibrations[:, i].any()
    }
    found: list[SharedError] = []
    for place in ("fin", "plate", "air", "heat", "heater"):
        names = [name for name in rig.sensors if name in read and read[name].place == place]
        found += [SharedError("common", place)] if names else []
        found += [SharedError("own", name) for name in names] if len(names) > 1 else []
    bored = {s.name for group in groups if group.problem for s in group.sensors if s.position_sd > 0}
    found += [SharedError("position", name) for name in rig.sensors if name in bored]
    found += [SharedError("length", name) for name, _ in uncertain_lengths(rig)]
    levels = {
        p.name: None
        for group in groups
        if group.problem
        for p in group.own
        if _has_level(p, {s.place for s in group.sensors})
    }
    return found + [SharedError("level", name) for name in levels]


def _effects(model: Model, group: Group, w: Array, s: Array) -> Array:
    """Return what each shared error does to each row (R, N, m), at own (R, p) and shared unknowns (q,)."""
    found = np.zeros((group.size, group.rows, len(model.errors)))
    alone = {error.name for error in model.errors if error.kind == "own"}
    slopes = _slopes(group, w, s)
    for column, error in enumerate(model.errors):
        if error.kind == "level":
            for j, parameter in enumerate(group.own):
                if group.problem is not None and parameter.name == error.name:
                    found[:, j - len(group.own), column] = -group.own_sds[j]
        elif error.kind == "length":
            found[:, : group.values.shape[1], column] = _by_length(group, w, s, error.name)
        else:
            for i, sensor in enumerate(group.sensors):
                if error.kind == "common" and sensor.place == error.name:
                    share = 1 - OWN_SHARE * (sensor.name in alone)
                    found[:, i, column] = np.sqrt(share) * group.calibrations[:, i]
                elif sensor.name == error.name and error.kind == "own":
                    found[:, i, column] = np.sqrt(OWN_SHARE) * group.calibrations[:, i]
                elif sensor.name == error.name and error.kind == "position":
                    found[:, i, column] = slopes[:, i] * sensor.position_sd
    return found


def _bends(model: Model, group: Group, w: Array, s: Array) -> Array:
    """Return how the effects on readings change with own and shared unknowns (R, n, p + q, m).

    They matter: a conductivity that is higher and a heat that reads too little are one and the same for all
    runs together, but only if what the error does grows with what is predicted, as it does.
    """
    n, p, q = group.values.shape[1], len(group.own), model.n_physical
    found = np.zeros((group.size, n, p + q, len(model.errors)))
    if group.problem is None:
        return found
    own = BEND * np.array([1.0 if each.transform == "identity" else 0.01 for each in group.own])
    shared = BEND * np.array(
        [1.0 if each.transform == "identity" else 0.01 for each in model.shared[:q]], dtype=np.float64
    )
    for c in range(p + q):
        step = np.zeros(p + q)
        step[c] = np.concatenate([own, shared])[c]
        sides = []
        for sign in (1, -1):
            w_there, s_there = w + sign * step[:p], s + sign * step[p:]
            at = _at_predicted(group, w_there, s_there)
            sides.append(_effects(model, at, w_there, s_there)[:, :n])
        found[:, :, c] = (sides[0] - sides[1]) / (2 * step[c])
    return found


def _slopes(group: Group, w: Array, s: Array) -> Array:
    """Return dT/dx [K/m] at the fin sensors (R, n_fin), by a difference that stays inside the fin."""
    problem = group.problem
    if problem is None:
        return np.zeros(group.values.shape)
    x, length = problem.measured.positions, problem.rig.length
    step = LENGTH_STEP * length
    low, high = np.maximum(x - step, 0.0), np.minimum(x + step, length)
    values = group.by_name(w, _repeated(s, group.size), np.arange(group.size))
    found = problem.solve(values, np.concatenate([low, high])).temperatures
    return np.asarray((found[:, len(x) :] - found[:, : len(x)]) / (high - low))


def _by_length(group: Group, w: Array, s: Array, name: str) -> Array:
    """Return what one standard uncertainty of a length makes of each reading (R, n) [K, W]."""
    problem, n = group.problem, group.values.shape[1]
    if problem is None:
        return np.zeros((group.size, n))
    length = problem.rig.geometry[name]
    step = LENGTH_STEP * length.value
    values = group.by_name(w, _repeated(s, group.size), np.arange(group.size))
    up, down = (
        problem.predict_values(values, group.size, {name: length.value + sign * step})[:, :n]
        for sign in (1, -1)
    )
    return np.asarray((up - down) / (2 * step) * length.sd)


def _repeated(s: Array, count: int) -> Array:
    return np.broadcast_to(s, (count, len(s)))
