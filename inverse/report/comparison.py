"""Comparison: the estimated coefficient beside the one that a healthy fin would show, in words."""

import math
from dataclasses import dataclass

from finback.estimate import Estimate, Summary
from finback.expectation import STATED, Expected, ImpliedSpeed
from finback.quantity import format_number
from finback.report import phrases

ZERO_CELSIUS = 273.15
IN_LINE = 2.0  # combined standard uncertainties up to which the two are said to agree
UNIT = "W/(m^2 K)"
TOTAL = "h holds what the fin radiates too, the correlation convection alone."


@dataclass(frozen=True, slots=True)
class Comparison:
    """What a healthy fin would show.

    `verdict`: one or two sentences that stand alone. `rows`: name and value of what the correlation rests on,
    none where the rig states the coefficient itself; `notes`: what else must be known of it, sentences.
    """

    verdict: str
    rows: tuple[tuple[str, str], ...]
    notes: tuple[str, ...]


def compare(estimate: Estimate) -> Comparison | None:
    """Return the comparison, None where the rig tells nothing of a healthy fin nor of moving air."""
    expected, implied = estimate.expected, estimate.implied_speed
    sentences, notes = [], []
    if expected is not None:
        sentences += [_healthy(expected), _beside(expected, estimate.parameters.get("h"))]
        notes += [f"Assumed: {'; '.join(expected.notes)}."] if expected.notes else []
    if implied is not None:
        sentences.append(_speed(implied))
    if not sentences:
        return None
    total = "emissivity" not in estimate.parameters
    law = implied is not None or (expected is not None and expected.correlation != STATED)
    flags = dict.fromkeys((*(expected.flags if expected else ()), *(implied.flags if implied else ())))
    return Comparison(
        phrases.told(" ".join(sentences)),
        () if expected is None or expected.correlation == STATED else _rows(expected),
        tuple(phrases.told(note) for note in (*([TOTAL] if law and total else []), *notes, *flags)),
    )


def _healthy(expected: Expected) -> str:
    value = phrases.number(expected.coefficient, 0.0, UNIT)
    if expected.sd > 0:
        value = f"{phrases.plus_minus(expected.coefficient, 2 * expected.sd, UNIT)} {phrases.COVERAGE}"
    by = "as the rig states" if expected.correlation == STATED else f"after {expected.name}"
    return f"A healthy fin would show h = {value}, {by}."


def _beside(expected: Expected, h: Summary | None) -> str:
    """Return how the estimate lies beside the expectation."""
    if h is None or h.median is None or h.sd is None:
        return "The estimate leaves h open, so the two cannot be compared."
    difference = h.median - expected.coefficient
    side = "below" if difference < 0 else "above"
    per_cent = format_number(100 * abs(difference) / expected.coefficient, 2)
    share = f"The estimate lies {per_cent} % {side} that"
    combined = math.hypot(h.sd, expected.sd)
    if not combined:
        return f"{share}."
    away = abs(difference) / combined
    verdict = "in line with it" if away <= IN_LINE else "more than they explain"
    return f"{share}, {format_number(away, 2)} combined standard uncertainties: {verdict}."


def _speed(implied: ImpliedSpeed) -> str:
    if implied.speed is None or implied.sd is None:
        return "No speed of the air explains the estimate."
    shown = f"{phrases.plus_minus(implied.speed, 2 * implied.sd, 'm/s')} {phrases.COVERAGE}"
    beside = ""
    if implied.stated is not None:
        beside = f"; the rig states {implied.stated:.3g} m/s"
    return f"The estimate implies an air speed of {shown}{beside}."


def _rows(expected: Expected) -> tuple[tuple[str, str], ...]:
    """Return what the correlation was evaluated with, and what it gave."""
    rows = [("correlation", f"{expected.name} ({expected.correlation})")]
    if expected.film_temperature is not None:
        film = f"{expected.film_temperature - ZERO_CELSIUS:.1f} °C"
        rows.append(("film temperature", f"{film}, half-way between the air and the fin's mean"))
    rows.append(("air", "still" if expected.speed is None else f"{expected.speed:.3g} m/s"))
    if expected.length is not None:
        rows.append(("characteristic length", f"{expected.length_name}, {1e3 * expected.length:.3g} mm"))
    groups = (
        ("Reynolds number Re", expected.reynolds),
        ("Rayleigh number Ra", expected.rayleigh),
        ("Prandtl number Pr", expected.prandtl),
        ("Nusselt number Nu", expected.nusselt),
    )
    rows += [(name, format_number(value)) for name, value in groups if value is not None]
    return tuple((phrases.clean(name), phrases.clean(text)) for name, text in rows)
