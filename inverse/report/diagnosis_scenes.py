"""Scenes of a diagnosis: what its pictures show, in the units they are drawn in; nothing is drawn here."""

from dataclasses import dataclass

from finback.diagnosis import COSTED, HEALTHY, Cause, Cost, Diagnosis
from finback.findings import Finding
from finback.models.constants import ZERO_CELSIUS
from finback.posing import is_read
from finback.report import phrases
from finback.restoring import Interval
from finback.rig import Rig

LEAST_REST = 0.02  # of what a healthy fin does more, from which the rest has a step of its own
LONGEST_NAME = 22


@dataclass(frozen=True, slots=True)
class Level:
    """One end of the waterfall: `name`, value with its 95 % limits, and that as `text`."""

    name: str
    value: float
    low: float
    high: float
    text: str


@dataclass(frozen=True, slots=True)
class Step:
    """What one cause put right brings: from `start` by `expected`, the share of `whole` that is probable.

    `low` and `high`, the 95 % limits of `whole`, 0 for what several causes do together; `text` beside it.
    """

    name: str
    start: float
    expected: float
    whole: float
    low: float
    high: float
    text: str


@dataclass(frozen=True, slots=True)
class Waterfall:
    """From `now` over the steps to `healthy`, of one quantity; all have as many steps."""

    now: Level
    steps: tuple[Step, ...]
    healthy: Level


@dataclass(frozen=True, slots=True)
class Read:
    """One temperature that was read: name, place, x [mm] (None beside the fin), and °C.

    `should`: what it would read if it were right, None where it is not said to be wrong.
    """

    name: str
    place: str
    x: float | None
    measured: float
    should: float | None


def moves(change: Interval | None) -> bool:
    """Tell whether a change is one at all: a wrong thermometer changes nothing in the fin."""
    return change is not None and (change.low95 != 0 or change.high95 != 0)


def heat(found: Diagnosis) -> Waterfall:
    """Return the waterfall of the heat into the fin [W]."""
    changes = [(cause, cause.heat_recovered) for cause in _moving(found) if cause.heat_recovered]
    return _waterfall(changes, *_ends(found, "heat"))


def base_temperature(found: Diagnosis) -> Waterfall | None:
    """Return the waterfall of the base temperature [°C], its steps in K; None where nothing moves it."""
    changes = [
        (cause, cause.base_temperature_change) for cause in _moving(found) if cause.base_temperature_change
    ]
    return _waterfall(changes, *_ends(found, "base")) if any(moves(change) for _, change in changes) else None


def _moving(found: Diagnosis) -> list[Cause]:
    """Return the causes that change what the fin does, those likely enough to be costed."""
    likely = [each for each in found.causes if each.code != HEALTHY and each.probability >= COSTED]
    return [each for each in likely if moves(each.heat_recovered)]


def _ends(found: Diagnosis, what: str) -> tuple[Level, Level]:
    now, healthy = found.costs[0], found.costs[-1]
    return _level("now", now, what), _level("healthy", healthy, what)


def _level(name: str, cost: Cost, what: str) -> Level:
    value = cost.heat if what == "heat" else cost.base_temperature
    return Level(name, value.median, value.low95, value.high95, middle(value))


def _waterfall(changes: list[tuple[Cause, Interval]], now: Level, healthy: Level) -> Waterfall:
    steps, at = [], now.value
    for cause, change in changes:
        expected = cause.probability * change.median
        name = (
            f"{phrases.clean(cause.name, LONGEST_NAME)}\nput right ({phrases.probability(cause.probability)})"
        )
        steps.append(
            Step(
                name,
                at,
                expected,
                change.median,
                change.low95,
                change.high95,
                signed(change),
            )
        )
        at += expected
    rest = healthy.value - at
    if (
        steps
        and abs(rest) > LEAST_REST * abs(healthy.value - now.value)
        and abs(rest) > 0.1 * _width(healthy)
    ):
        unit = changes[0][1].unit
        text = signed(Interval(rest, rest, rest, unit))
        steps.append(Step("all together,\nbeyond that", at, rest, rest, 0.0, 0.0, text))
    return Waterfall(now, tuple(steps), healthy)


def _width(level: Level) -> float:
    return level.high - level.low


def middle(value: Interval) -> str:
    """Return the median with its unit, to two digits of its uncertainty."""
    return phrases.number(value.median, (value.high95 - value.low95) / 2, value.unit)


def limits(value: Interval) -> str:
    """Return the 95 % interval, without a unit."""
    return phrases.span(value.low95, value.high95) if value.high95 > value.low95 else phrases.NOTHING


def signed(change: Interval) -> str:
    """Return a change with its sign, "+1.61 W"."""
    half = (change.high95 - change.low95) / 2 or 0.1 * abs(change.median)
    text = phrases.number(change.median, half, change.unit)
    return text if text.startswith("−") or change.median == 0 else f"+{text}"


def temperatures(found: Diagnosis) -> tuple[Read, ...]:
    """Return the temperatures that were read, those that are said to be wrong marked."""
    wrong = _should(found)
    reads = []
    for sensor in found.rig.sensors.values():
        if sensor.reads_temperature and is_read(sensor, found.readings):
            should = wrong.get(sensor.name)
            reads.append(
                Read(
                    phrases.clean(sensor.name, 16),
                    sensor.place,
                    None if sensor.position is None else 1e3 * sensor.position,
                    found.readings.values[sensor.name] - ZERO_CELSIUS,
                    None if should is None else should - ZERO_CELSIUS,
                )
            )
    return tuple(reads)


def _should(found: Diagnosis) -> dict[str, float]:
    """Return what wrong thermometers would read if they were right [K], by sensor."""
    values, wrong = found.readings.values, {}
    for finding in found.measurement_faults:
        name = finding.sensor
        if name is None or name not in values or not found.rig.sensors[name].reads_temperature:
            continue
        other = _swapped_with(finding, found.rig)
        if other is not None and other in values:
            wrong[name], wrong[other] = values[other], values[name]
        elif "error" in finding.evidence:
            wrong.setdefault(name, values[name] - float(finding.evidence["error"]))
    return wrong


def _swapped_with(finding: Finding, rig: Rig) -> str | None:
    """Return the other of two swapped sensors, which only the sentence of their finding names."""
    if finding.code != "sensor-swap":
        return None
    named = (name for name in rig.sensors if finding.message.startswith(f"{finding.sensor} and {name} are "))
    return next(named, None)
