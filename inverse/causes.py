"""Causes: what is wrong in words and numbers, what it costs, and what is not told apart."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import faults, restoring
from finback.densities import Weighed
from finback.faults import Suspicion
from finback.findings import Finding
from finback.healthy import Healthy
from finback.hypotheses import Hypothesis
from finback.quantity import format_number, pretty_unit
from finback.restoring import Effects, Interval
from finback.suspects import ODDS, Suspect

Array = NDArray[np.float64]
Parts = Sequence[tuple[float, Weighed, Effects]]

SHOWN = 0.02  # probability from which a cause is listed
COSTED = 0.05  # and from which what it costs is shown
LIKELY = 0.5  # and from which it is spoken of as it is
OPEN = 0.15  # probability from which a cause is among those that cannot be told apart
CLEAR = 0.8  # and from which nothing is left to tell
STEEP = 0.2  # of the excess temperature of a plate, that falls over a joint: worth a look in any case
HEALTHY = "healthy"
UNSEEN_JOINT = Suspect("joint", ODDS["joint"])
"""A bad joint where nothing reads the plate: it stays as likely as it was."""


@dataclass(frozen=True, slots=True)
class Cause:
    """One answer to why the fin does less than it should, or reads as if it did.

    `code` of its finding; `kind` of suspect, "healthy" for none; `name` in words; `sensor` it concerns and
    the `other` of a swap, if any; `probability` that it is so, alone or with another; `message`;
    `heat_recovered` and `base_temperature_change`, what putting it right brings, None where nothing tells.
    """

    code: str
    kind: str
    name: str
    sensor: str | None
    other: str | None
    probability: float
    message: str
    heat_recovered: Interval | None
    base_temperature_change: Interval | None


@dataclass(frozen=True, slots=True)
class Cost:
    """One line of the table of costs: `what`, with the heat into the fin and the base temperature.

    `cause`: the name of the one that is put right, where one alone is; the line then speaks of the fins that
    have it, and not of all that may be, and `heat_now` and `base_now` are what those do now.
    """

    what: str
    cause: str | None
    heat: Interval
    base_temperature: Interval
    heat_now: Interval | None = None
    base_now: Interval | None = None


@dataclass(frozen=True, slots=True)
class Together:
    """Two things that are wrong at once: the names of the causes, and how probable that is."""

    names: tuple[str, ...]
    probability: float


NAMES: Mapping[str, str] = {
    "joint": "bad joint",
    "k": "low conductivity",
    "h": "low convection",
    "emissivity": "lost radiation",
    "tip": "tip not as drawn",
    "air": "air not as read",
    "heat": "heat not as read",
    "offset": "wrong thermometer",
    "shift": "hole at another place",
    "swap": "swapped sensors",
    "misfit": "smooth misfit",
    "scatter": "thermometers that scatter",
    "more": "more convection than expected",
}
SAID: Mapping[str, str] = {
    "h": "film coefficient",
    "k": "conductivity",
    "joint": "joint resistance",
    "emissivity": "emissivity",
}
UNITS: Mapping[str, str] = {"h": "W/(m^2 K)", "k": "W/(m K)", "joint": "m^2 K/W", "emissivity": "1"}
PUT_RIGHT: Mapping[str, str] = {
    "joint": "a healthy joint",
    "k": "the stated conductivity",
    "h": "the film coefficient of a healthy fin",
    "emissivity": "the stated emissivity",
    "tip": "the tip as drawn",
    "air": "the air as read",
}
WORDS_OF_TIPS: Mapping[str, str] = {
    "adiabatic": "covered or insulated",
    "convective": "free and loses heat",
    "fixed": "held at a temperature of its own",
}


def healthy_cause(probability: float, known: Healthy) -> Cause:
    """Return "nothing wrong" as one of the causes."""
    told = [SAID[name] for name in known.priors if name in SAID]
    what = f"{', '.join(told)} and all readings" if told else "all readings"
    message = f"Nothing is wrong that these readings could show: {what} are as they should be."
    if probability < LIKELY:
        message = "Fin and readings are as they should be."
    nothing = Interval(0.0, 0.0, 0.0, "W")
    change = replace(nothing, unit="K")
    return Cause(HEALTHY, HEALTHY, "nothing wrong", None, None, probability, message, nothing, change)


def cause_of(suspicion: Suspicion, known: Healthy, parts: Parts) -> Cause | None:
    """Return a cause with what putting it right brings, None where no hypothesis with it was drawn.

    Arguments: suspicion; known, what a healthy fin has; parts, the hypotheses that were drawn, with their
    probabilities and effects.
    """
    suspect, own = suspicion.suspect, _with(suspicion, parts)
    heat = change = None
    if suspect is UNSEEN_JOINT:
        message = "Nothing reads the plate, so the joint stays as likely to be bad as on any such rig."
    elif own:
        wanted = faults.key(suspect)
        changes = [(share, effects.restored[wanted] - effects.now) for share, _, effects in own]
        heat, change = restoring.of_heat(changes), restoring.of_base(changes, "K")
        message = f"{_told(suspicion, known, own)}{_brings(heat, change) if suspect.of_the_fin else ''}."
    else:
        return None
    return Cause(
        code=suspect.code,
        kind=suspect.kind,
        name=_name(suspect),
        sensor=suspect.sensor,
        other=suspect.other if suspect.kind == "swap" else None,
        probability=suspicion.probability,
        message=message,
        heat_recovered=heat,
        base_temperature_change=change,
    )


def costs(parts: Parts, suspicions: Sequence[Suspicion]) -> list[Cost]:
    """Return the table of costs: now, with each cause in the fin put right, with all of them."""

    def line(what: str, cause: str | None, effects: Sequence[tuple[float, Array]]) -> Cost:
        return Cost(what, cause, restoring.of_heat(effects), restoring.of_base(effects))

    found = [line("now", None, [(share, effects.now) for share, _, effects in parts])]
    for suspicion in suspicions:
        suspect, own = suspicion.suspect, _with(suspicion, parts)
        moves = suspect.of_the_fin or suspect.kind == "air"
        if moves and suspicion.probability >= COSTED and own:
            wanted = faults.key(suspect)
            restored = [(share, effects.restored[wanted]) for share, _, effects in own]
            now = line("now", None, [(share, effects.now) for share, _, effects in own])
            put_right = line(f"with {PUT_RIGHT[suspect.kind]}", _name(suspect), restored)
            found.append(replace(put_right, heat_now=now.heat, base_now=now.base_temperature))
    found.append(line(HEALTHY, None, [(share, effects.healthy) for share, _, effects in parts]))
    return found


def unjudged_joint(known: Healthy, parts: Parts) -> list[Finding]:
    """Return what the readings say of a joint of which nothing says what a healthy one has."""
    if "joint" in known.priors or not all("joint" in effects.values for _, _, effects in parts):
        return []
    found = restoring.pooled(
        [(share, effects.values["joint"]) for share, _, effects in parts], UNITS["joint"]
    )
    steps = [(share, effects.values["plate"] - effects.now[1]) for share, _, effects in parts]
    whole = [(share, effects.values["plate"] - effects.values["air"]) for share, _, effects in parts]
    step, excess = (restoring.pooled(each, "K").median for each in (steps, whole))
    message = (
        f"The joint has {_number(found.median)} {pretty_unit(found.unit)} (95 %: {_number(found.low95)} to "
        f"{_number(found.high95)}), a step of {_number(step, 2)} K of the {_number(excess, 2)} K between "
        "plate and air; nothing says what a healthy one has."
    )
    return [Finding("joint", "caution" if abs(step) > STEEP * abs(excess) else "note", message)]


def together(every: Sequence[Hypothesis], shares: Array) -> list[Together]:
    """Return the pairs of causes that are likely, likeliest first."""
    found: dict[tuple[str, ...], float] = {}
    for each, share in zip(every, shares.tolist(), strict=True):
        if len(each.suspects) > 1:
            names = tuple(map(_name, each.suspects))
            found[names] = found.get(names, 0.0) + share
    likely = [Together(names, share) for names, share in found.items() if share >= SHOWN]
    return sorted(likely, key=lambda each: -each.probability)


def cannot_tell(causes: Sequence[Cause]) -> list[str]:
    """Return a sentence where several causes remain that the readings do not tell apart."""
    found = []
    if any(cause.code == "joint" and cause.heat_recovered is None for cause in causes):
        found.append("Nothing reads the plate, so a bad joint cannot be told from a healthy one.")
    rivals = [cause for cause in causes if cause.probability >= OPEN]
    if causes[0].probability < CLEAR and len(rivals) > 1:
        named = " and ".join(f"{cause.name} ({cause.probability:.2f})" for cause in rivals)
        found.append(f"These readings cannot tell apart: {named}.")
    return found


def _with(suspicion: Suspicion, parts: Parts) -> list[tuple[float, Weighed, Effects]]:
    wanted = faults.key(suspicion.suspect)
    return [part for part in parts if wanted in part[2].restored]


def _name(suspect: Suspect) -> str:
    """Return what a suspect is called, with its sensors."""
    if suspect.sensor is None:
        return NAMES[suspect.kind]
    both = suspect.kind == "swap"
    sensors = f"{suspect.sensor} and {suspect.other}" if both else suspect.sensor
    return f"{NAMES[suspect.kind]} ({sensors})"


def _told(suspicion: Suspicion, known: Healthy, parts: Parts) -> str:
    """Return what a cause is in words, with its number."""
    suspect = suspicion.suspect
    if suspect.kind == "more":
        now = restoring.pooled([(share, effects.values["h"]) for share, _, effects in parts], UNITS["h"])
        expected = restoring.pooled([(share, effects.right["h"]) for share, _, effects in parts], UNITS["h"])
        return (
            f"Film coefficient {_number(now.median)} {pretty_unit(now.unit)} (95 %: {_number(now.low95)} to "
            f"{_number(now.high95)}), more than the {_number(expected.median)} that the rig expects: check "
            "what is expected"
        )
    if suspect.kind in known.priors:
        now, right = (
            restoring.pooled([(share, values[suspect.kind]) for share, values in of], UNITS[suspect.kind])
            for of in (
                [(share, effects.values) for share, _, effects in parts],
                [(share, effects.right) for share, _, effects in parts],
            )
        )
        name, unit = SAID[suspect.kind], pretty_unit(now.unit)
        return (
            f"{name[0].upper()}{name[1:]} {_number(now.median)} {unit} (95 %: {_number(now.low95)} to "
            f"{_number(now.high95)}), {_ratio(now.median / right.median)} the {_number(right.median)} {unit} "
            "of a healthy one"
        ).replace("  ", " ")
    if suspect.kind == "tip":
        return f"The tip is {WORDS_OF_TIPS[suspect.other or '']} and not as drawn"
    if suspect.kind == "misfit":
        return "The profile departs from every model in a smooth pattern: an uneven h, or leads"
    return faults.in_words(suspicion)


def _ratio(ratio: float) -> str:
    if ratio > 1.5:
        return f"{ratio:.2g} times"
    return f"{100 * abs(ratio - 1):.0f} % {'above' if ratio > 1 else 'below'}"


def _brings(heat: Interval, change: Interval) -> str:
    told = (
        f"; put right, {_number(heat.median)} W ({_number(heat.low95)} to {_number(heat.high95)}) more would "
        "flow"
    )
    if change.low95 == change.high95 == 0:  # nothing but the base itself was read
        return told
    side = "hotter" if change.median > 0 else "cooler"
    return f"{told}, with a base {_number(abs(change.median), 2)} K {side}"


def _number(value: float, digits: int = 3) -> str:
    return format_number(value, digits).replace("-", "−")
