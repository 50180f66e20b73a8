"""An overview of a rig and its readings before anything is computed: what was understood, what can be told.

What such a rig can tell in principle is counted here from its sensors and from what is stated; whether real
readings are good enough is for a fit to say.
"""

import textwrap
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from finback.quantity import Quantity
from finback.report.phrases import clean
from finback.rig import Rig, Sensor

WIDTH = 80
DRAWING = 64  # characters that stand for the length of the fin
PLACES = {
    "fin": "fin",
    "plate": "plate",
    "air": "air",
    "heat": "heat into the fins",
    "heater": "heater power",
}


@dataclass(frozen=True, slots=True)
class Telling:
    """What a rig can tell of one quantity in principle.

    Arguments: name, as in estimate.json; possible, whether the quantity itself can be told; reason, the rest
    of a sentence that starts with the quantity.
    """

    name: str
    possible: bool
    reason: str


def tellings(rig: Rig) -> tuple[Telling, ...]:
    """Return what the rig can tell of h, k and the joint, in that order.

    Temperatures along the fin give m² = hP/(kA), hence h/k, where there are more of them than unknowns beside
    k; a stated k or the heat into the fins [W] parts h from k; a temperature on the plate adds R''·k.
    """
    places = [sensor.place for sensor in rig.sensors.values()]
    heat, plate = "heat" in places, "plate" in places
    unknowns = 2 + ("air" not in places) + (rig.tip == "fixed" and rig.tip_temperature is None)
    along = places.count("fin")
    parted = heat or rig.conductivity is not None
    shape = along >= unknowns or (along + 1 >= unknowns and heat and rig.conductivity is not None)
    few = f"cannot be told: {along} of at least {unknowns} temperatures along the fin"
    by = " and ".join(["as stated"] * (rig.conductivity is not None) + ["from the heat into the fins"] * heat)
    apart = "state k in [material] or measure the heat into the fins"
    if "heater" in places and not heat:
        apart += " (the heater's power is only an upper bound on it)"

    if not shape:
        h = Telling("h", False, few)
    elif not parted:
        h = Telling("h", False, f"cannot be told apart from k, only h/k can: {apart}")
    else:
        h = Telling("h", True, f"can be told: h/k from the temperatures along the fin, k {by}")

    if heat and shape:
        beside = "" if rig.conductivity is None else ", beside what is stated"
        k = Telling(
            "k", True, f"can be told: from the heat into the fins and the slope at their base{beside}"
        )
    elif rig.conductivity is not None:
        k = Telling("k", False, "is what [material] states: the readings add nothing to it")
    else:
        k = Telling("k", False, f"cannot be told apart from h: {apart}")

    if not plate:
        joint = Telling("joint", False, "cannot be told: no sensor reads the plate")
    elif not shape:
        joint = Telling("joint", False, few)
    elif not parted:
        joint = Telling("joint", False, f"cannot be told, only its product with k can: {apart}")
    else:
        joint = Telling("joint", True, f"can be told: from the step between plate and base, with k {by}")
    return h, k, joint


def describe(rig: Rig, runs: Sequence[str] | None, candidates: Iterable[str]) -> str:
    """Return the overview as text that fits 80 columns.

    Arguments: rig; runs, the names of the runs in the readings, None where no readings were given;
    candidates, the names of those that a fit would compare.
    """
    parts = [
        clean(rig.title),
        "\n".join(_fin_lines(rig)),
        draw(rig),
        "\n".join(_sensor_table(rig)),
        "\n".join(
            f"{telling.name:<7}{_wrapped(telling.reason, indent=7).lstrip()}" for telling in tellings(rig)
        ),
        "\n".join(["Candidates", *(f"  {name}" for name in candidates)]),
    ]
    if rig.assumed:
        parts.append(
            "\n".join(["Assumed", *(_wrapped(clean(each.message), indent=2) for each in rig.assumed)])
        )
    if runs is not None:
        names = ", ".join(clean(run) for run in runs)
        parts.append(_wrapped(f"{len(runs)} {'run' if len(runs) == 1 else 'runs'}: {names}"))
    return "\n\n".join(parts)


def draw(rig: Rig) -> str:
    """Return the fin from base to tip with its sensors, to scale, in two or more lines of text.

    Names stand above their sensor where there is room for them.
    """
    length = rig.geometry["length"].value
    fin_sensors = sorted(
        (sensor for sensor in rig.sensors.values() if sensor.position is not None),
        key=lambda s: s.position or 0,
    )
    names, marks, free = [" "] * (DRAWING + 8), ["═"] * DRAWING, 0
    for sensor in fin_sensors:
        column = round((sensor.position or 0.0) / length * (DRAWING - 1))
        marks[column] = "●"
        label = clean(sensor.name)
        if column >= free and column + len(label) <= len(names):
            names[column : column + len(label)] = label
            free = column + len(label) + 1
    has_plate = any(sensor.place == "plate" for sensor in rig.sensors.values())
    base = "plate ▌" if has_plate else " base │"
    scale = f"0{f'{1000 * length:g} mm':>{DRAWING - 1}}"
    return "\n".join(
        [" " * 7 + "".join(names).rstrip(), f"{base}{''.join(marks)}│ tip", " " * 7 + scale],
    )


def _fin_lines(rig: Rig) -> list[str]:
    sizes = ", ".join(f"{name.replace('_', ' ')} {_shown(size)}" for name, size in rig.geometry.items())
    edges = ", edges guarded" if rig.guarded_edges else ""
    tip: str = rig.tip or "not stated: candidates are compared"
    if rig.tip == "fixed":
        tip += " at " + (
            "an unknown temperature" if rig.tip_temperature is None else _shown(rig.tip_temperature)
        )
    lines = [
        ("fin", f"{rig.profile_name}, {sizes}{edges}"),
        ("tip", tip),
        (
            "k",
            "not stated: a wide prior" if rig.conductivity is None else f"{_shown(rig.conductivity)}, stated",
        ),
    ]
    if rig.expected_joint is not None:
        lines.append(("joint", f"{_shown(rig.expected_joint)} when healthy"))
    if rig.expected_coefficient is not None:
        lines.append(("air", f"h {_shown(rig.expected_coefficient)} when healthy"))
    return [f"{name:<7}{_wrapped(text, indent=7).lstrip()}" for name, text in lines]


def _sensor_table(rig: Rig) -> list[str]:
    rows = [("sensor", "reads", "at", "noise", "calibration")]
    for sensor in rig.sensors.values():
        place = "" if sensor.position is None else f"{1000 * sensor.position:g} mm"
        if sensor.position_sd:
            place += f" ± {1000 * sensor.position_sd:g} mm"
        rows.append((clean(sensor.name, 20), PLACES[sensor.place], place, *_uncertainties(sensor)))
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    return [
        "  ".join(f"{cell:<{width}}" for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in rows
    ]


def _uncertainties(sensor: Sensor) -> tuple[str, str]:
    if sensor.noise == 0 and sensor.calibration == 0 and sensor.calibration_relative is None:
        return "exact", "exact"
    unit = "W" if sensor.place in ("heat", "heater") else "K"
    noise = "estimated"
    if sensor.noise_relative is not None:
        noise = f"{100 * sensor.noise_relative:g} %"
    elif sensor.noise is not None:
        noise = f"{sensor.noise:g} {unit}"
    if sensor.calibration_relative is not None:
        return noise, f"{100 * sensor.calibration_relative:g} %"
    return noise, f"{sensor.calibration:g} {unit}"


def _shown(quantity: Quantity) -> str:
    return clean(quantity.text, 40)


def _wrapped(text: str, indent: int = 0) -> str:
    space = " " * indent
    return textwrap.fill(text, WIDTH, initial_indent=space, subsequent_indent=space, break_on_hyphens=False)
