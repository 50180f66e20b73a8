"""The runs of a pooled estimate: which rows of a campaign are runs, which calibrate, which are left out.

An isothermal row, without heat and with all thermometers alike, says nothing of h; but whatever the
thermometers then differ by are their own errors. Such rows are kept for that.
"""

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from finback import checks, expectation
from finback.campaign import Source, sensors_alone
from finback.errors import FinbackError, InputError
from finback.handbook import ROOM
from finback.ledger import place_of
from finback.problem import HEATS
from finback.readings import Readings, values_of
from finback.rig import Rig, Sensor
from finback.wording import nearest, quoted

SHAREABLE = (
    *("k", "joint", "emissivity", "exponent", "rise", "tip_temperature", "surroundings"),
    *("bare_area", "loss", "loss_coefficient"),
)
"""What may be one unknown for a campaign. h is what runs are made to differ in; base, plate and air have the
temperatures of their run; the noise, the thermometers' errors, holes and lengths are one for all anyway."""

FEWEST_RUNS = 2
NOISES = 3.0  # standard deviations from each other, within which readings count as alike
Use = Literal["run", "calibration", "left out"]


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a campaign: its name in tables, what it is used for, its readings, or why it is left out."""

    name: str
    use: Use
    readings: Readings
    reason: str | None = None


@dataclass(frozen=True)
class Pool:
    """What a pooled estimate starts from.

    `rig`, its conductivity taken at the temperature of all runs; `share`, the names of what is shared;
    `rows`, in the order of their names as people count, whatever table they stand in.
    """

    rig: Rig
    share: tuple[str, ...]
    rows: tuple[Row, ...]

    def used(self, use: Use) -> tuple[Row, ...]:
        """Return the rows of one use."""
        return tuple(row for row in self.rows if row.use == use)


def parse(text: str, rigs: Sequence[Rig]) -> tuple[str, ...]:
    """Return the names of what a campaign shares, in the order of SHAREABLE.

    Arguments: text, names between commas; rigs of the campaign. Raises InputError for a name that is none,
    that stands twice, or that is no unknown of the rig, and for several rigs.
    """
    names = [part.strip() for part in text.split(",")]
    for number, name in enumerate(names):
        if name not in SHAREABLE:
            near = nearest(name, SHAREABLE)
            remedy = f"the nearest is {quoted(near)}" if near else f"choose from {', '.join(SHAREABLE)}"
            if name == "h":
                remedy = "h is each run's own; share what does not change from run to run, such as k,joint"
            raise InputError(None, "--share", f"{quoted(name)} cannot be shared", remedy)
        if name in names[:number]:
            raise InputError(None, "--share", f"{quoted(name)} stands twice", "name it once")
    if len({rig.sha256 for rig in rigs}) > 1:
        problem, remedy = "this campaign has several rigs", "share what runs of one rig have in common"
        raise InputError(None, "--share", problem, remedy)
    for name in names:
        wrong = _why_not(name, rigs[0])
        if wrong is not None:
            raise InputError(rigs[0].source, f"--share {name}", *wrong)
    return tuple(name for name in SHAREABLE if name in names)


def _why_not(name: str, rig: Rig) -> tuple[str, str] | None:
    """Return why a quantity is no unknown of a rig, and what to do; None where it is one."""
    laws = rig.laws or ()
    still = rig.surroundings.driven is False or rig.exponent is not None or "free-convection" in laws
    of_plate = {} if rig.plate is None else rig.plate.unknowns()
    stated = {
        "k": rig.conductivity,
        "emissivity": rig.emissivity,
        "exponent": rig.exponent,
        "tip_temperature": rig.tip_temperature,
        "surroundings": rig.surroundings.temperature,
        **of_plate,
    }.get(name)
    if stated is not None and stated.sd == 0:
        return "the rig states it exactly, so that there is nothing to learn", (
            'leave it out, or state its uncertainty, as in "167 W/(m K) +/- 5 %"'
        )
    known = {
        "k": True,
        "joint": bool(rig.sensors_on("plate")),
        "emissivity": rig.emissivity is not None or "radiating" in laws,
        "exponent": still,
        "rise": "varying" in laws,
        "tip_temperature": rig.tip == "fixed" or (rig.tip is None and "fixed" in (rig.tips or ("fixed",))),
        "surroundings": rig.surroundings.temperature is not None,
    }.get(name, name in of_plate)
    if known:
        return None
    if name == "joint":
        return "no sensor reads the plate, so no run can tell of a joint", "add one, or leave joint out"
    return "it is no unknown of this rig", "leave it out, or add to the rig what makes it one"


def gather(sources: Sequence[Source], share: tuple[str, ...]) -> Pool:
    """Read every row of a campaign and tell what it is used for.

    Arguments: sources, tables of one rig; share, as `parse` returns it. Raises InputError where fewer than
    two rows are runs: one run shares nothing with itself.
    """
    rig = sources[0].rig
    rows = sorted(_rows(sources), key=lambda row: (place_of(row.name), row.name))
    runs = [row for row in rows if row.use == "run"]
    if len(runs) < FEWEST_RUNS:
        number = "only one run" if runs else "no run"
        why = next((row.reason for row in rows if row.reason is not None), None)
        problem = f"{number} of {len(rows)} can be used" + (f" (one cannot: {why})" if why else "")
        remedy = "a pooled estimate needs two runs at the least; leave --share out, or add runs"
        raise InputError(None, "--share", problem, remedy)
    return Pool(_warmed(rig, runs), share, tuple(rows))


def _warmed(rig: Rig, runs: Sequence[Row]) -> Rig:
    """Return the rig with a handbook's conductivity as at the mean temperature of all runs."""
    if rig.handbook is None:
        return rig
    means = [expectation.mean_temperature(rig, row.readings) for row in runs]
    ends = np.array([expectation.extremes(rig, row.readings) for row in runs])
    spread = (float(ends[:, 0].min()), float(ends[:, 1].max()))
    return rig.warmed(float(np.mean(means)) if means else ROOM, spread)


def _rows(sources: Sequence[Source]) -> Iterator[Row]:
    counts = [Counter(planned.name for planned in source.planned(0, 0)) for source in sources]
    tables = Counter(name for count in counts for name in count)
    for source, own in zip(sources, counts, strict=True):
        columns = sensors_alone(source.table.columns)
        for planned in source.planned(0, 0):
            shown = planned.name if tables[planned.name] == 1 else f"{source.label}: {planned.name}"
            nothing = Readings(shown, {})
            if planned.refused is not None:
                yield Row(shown, "left out", nothing, planned.refused)
            elif own[planned.name] > 1:
                yield Row(shown, "left out", nothing, "several runs of its file have this name")
            else:
                try:
                    cells = (0, tuple(planned.cells))
                    values = values_of(columns, planned.name, cells, source.table.decimal_comma, None)
                except InputError as error:
                    yield Row(shown, "left out", nothing, error.problem)
                else:
                    yield _sort(source.rig, Readings(shown, values))


def _sort(rig: Rig, readings: Readings) -> Row:
    """Return a row with what its readings are good for."""
    if is_isothermal(rig, readings.values):
        return Row(readings.run, "calibration", readings)
    try:
        checks.check_run(rig, readings)
    except FinbackError as error:
        return Row(readings.run, "left out", readings, getattr(error, "problem", str(error)))
    return Row(readings.run, "run", readings)


def is_isothermal(rig: Rig, values: Mapping[str, float]) -> bool:
    """Tell whether a row was read on a rig of one temperature throughout.

    No heat is read, or none beyond its noise; a temperature of the air is read; and all thermometers agree
    with it. Where the heat is known to be zero they may differ by what their calibration errors make of them;
    where nothing tells the heat, by their noise alone: a fin that is a little warmer than its air shows a
    difference as well.
    """
    read = [(sensor, values[name]) for name, sensor in rig.sensors.items() if name in values]
    heats = [(sensor, value) for sensor, value in read if sensor.place in HEATS]
    if any(abs(value) > NOISES * (sensor.noise or 0.0) for sensor, value in heats):
        return False
    thermometers = [(sensor, value) for sensor, value in read if sensor.reads_temperature]
    airs = [value for sensor, value in thermometers if sensor.place == "air"]
    if not airs or not any(sensor.place == "fin" for sensor, _ in thermometers):
        return False
    middle = float(np.mean(airs))
    allowed = max(NOISES * _scatter(sensor, value, bool(heats)) for sensor, value in thermometers)
    apart = max(abs(value - middle) for _, value in thermometers)
    return apart <= max(allowed, checks.SMALLEST_EXCESS)


def _scatter(sensor: Sensor, value: float, calibration: bool) -> float:
    """Return by how much [K] a thermometer may differ from another at one temperature, for one sd."""
    common = sensor.calibration_at(value) if calibration else 0.0
    return float(np.hypot(sensor.noise or 0.0, np.sqrt(2) * common))


def without(pool: Pool, reasons: Mapping[str, str]) -> Pool:
    """Return the pool with some more runs left out. Argument: reasons by the runs' names."""
    rows = [
        replace(row, use="left out", reason=reasons[row.name]) if row.name in reasons else row
        for row in pool.rows
    ]
    return replace(pool, rows=tuple(rows))
