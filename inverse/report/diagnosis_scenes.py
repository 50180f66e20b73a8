"""Scenes of a diagnosis: what its pictures show, in the units they are drawn in; nothing is drawn here."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TypeGuard

from finback.causes import COSTED, HEALTHY, Cause
from finback.diagnosis import Diagnosis
from finback.models.constants import ZERO_CELSIUS
from finback.posing import is_read
from finback.report import phrases
from finback.restoring import Interval

LEAST_REST = 0.02  # of what a healthy fin does more, from which the rest has a step of its own
SEEN = 0.1  # and of the 95 % interval of that
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


def moves(change: Interval | None) -> TypeGuard[Interval]:
    """Tell whether a change is one at all: a wrong thermometer changes nothing in the fin."""
    return change is not None and (change.low95 != 0 or change.high95 != 0)


def waterfalls(found: Diagnosis) -> tuple[Waterfall, Waterfall | None]:
    """Return the waterfalls of the heat into the fin [W] and of the base temperature [°C], its steps in K.

    Both have the same steps. The second is None where nothing moves the base.
    """
    now, healthy = found.costs[0], found.costs[-1]
    likely = [each for each in found.causes if each.code != HEALTHY and each.probability >= COSTED]
    causes = [each for each in likely if moves(each.heat_recovered)]
    heat = _waterfall(causes, [each.heat_recovered for each in causes], now.heat, healthy.heat)
    changes = [each.base_temperature_change for each in causes]
    if not any(map(moves, changes)):
        return (_with_rest(heat, "W") if _leaves(heat) else heat), None
    base = _waterfall(causes, changes, now.base_temperature, healthy.base_temperature, "K")
    if _leaves(heat) or _leaves(base):
        heat, base = _with_rest(heat, "W"), _with_rest(base, "K")
    return heat, base


def _waterfall(
    causes: Sequence[Cause],
    changes: Sequence[Interval | None],
    now: Interval,
    healthy: Interval,
    unit: str = "W",
) -> Waterfall:
    steps, at = [], now.median
    for cause, known in zip(causes, changes, strict=True):
        change = known or Interval(0.0, 0.0, 0.0, unit)
        expected = cause.probability * change.median
        name = (
            f"{phrases.clean(cause.name, LONGEST_NAME)}\nput right ({phrases.probability(cause.probability)})"
        )
        steps.append(Step(name, at, expected, change.median, change.low95, change.high95, signed(change)))
        at += expected
    return Waterfall(_level("now", now), tuple(steps), _level("healthy", healthy))


def _level(name: str, value: Interval) -> Level:
    return Level(name, value.median, value.low95, value.high95, middle(value))


def _rest(fall: Waterfall) -> float:
    return fall.healthy.value - (fall.steps[-1].start + fall.steps[-1].expected)


def _leaves(fall: Waterfall) -> bool:
    """Tell whether the steps miss the healthy fin by something that is worth a step of its own."""
    if not fall.steps:
        return False
    gained = abs(fall.healthy.value - fall.now.value)
    return abs(_rest(fall)) > max(LEAST_REST * gained, SEEN * (fall.healthy.high - fall.healthy.low))


def _with_rest(fall: Waterfall, unit: str) -> Waterfall:
    """Return a waterfall with a step for what its causes do not bring."""
    rest, half = _rest(fall), (fall.healthy.high - fall.healthy.low) / 2
    text = signed(Interval(rest, rest - half, rest + half, unit))
    last = Step("the rest\nput right", fall.healthy.value - rest, rest, rest, 0.0, 0.0, text)
    return replace(fall, steps=(*fall.steps, last))


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
        other = str(finding.evidence.get("other", ""))
        if other in values:
            wrong[name], wrong[other] = values[other], values[name]
        elif "error" in finding.evidence:
            wrong.setdefault(name, values[name] - float(finding.evidence["error"]))
    return wrong
