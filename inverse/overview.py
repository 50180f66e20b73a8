"""An overview of a rig and its readings before anything is computed: what was understood, what can be told.

What such a rig can tell in principle is counted here from its sensors and from what is stated; whether real
readings are good enough is for a fit to say.
"""

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import outline
from finback.handbook import ROOM
from finback.models.constants import ZERO_CELSIUS
from finback.quantity import Quantity
from finback.report.phrases import clean, told
from finback.report.terminal import wrap
from finback.rig import Rig, Sensor
from finback.surroundings import Surroundings

DRAWING = 64  # characters that stand for the length of the fin
SHORTEST, TALLEST = 24, 9.0  # characters of the length of a stout one, and of half its thickness
STOUTEST = 12.0  # half of a thickness, in characters, beyond which it is drawn smaller
TAPER_SEEN = 3.0  # half of a thickness, in characters, from which its taper is seen
FULL, THIN = 0.75, 0.3  # half of a thickness, in characters, drawn as a full line and as a double one
STRETCHES = (2, 3, 4, 5, 8, 10, 15, 20, 30, 50, 100)
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
    heat, plate = any(map(rig.tells_heat, places)), "plate" in places
    source = "the heat into the fins" if "heat" in places else "the heater's power less its losses"
    air_told = "air" in places or rig.surroundings.air is not None
    unknowns = 2 + (not air_told) + (rig.tip == "fixed" and rig.tip_temperature is None)
    along = places.count("fin")
    parted = heat or rig.conductivity is not None
    shape = along >= unknowns or (along + 1 >= unknowns and heat and rig.conductivity is not None)
    few = f"cannot be told: {along} of at least {unknowns} temperatures along the fin"
    by = " and ".join(["as stated"] * (rig.conductivity is not None) + [f"from {source}"] * heat)
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
        k = Telling("k", True, f"can be told: from {source} and the slope at their base{beside}")
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


def describe(rig: Rig, runs: Sequence[str] | None, candidates: Iterable[str], compared: str) -> str:
    """Return the overview as text that fits 80 columns.

    Arguments: rig; runs, the names of the runs in the readings, None where no readings were given;
    candidates, the names of those that a fit would compare; compared, the sentence on why those.
    """
    blocks = [
        wrap(clean(rig.title)),
        _labelled(_fin_texts(rig)),
        [draw(rig)],
        _sensor_table(rig),
        _labelled((telling.name, telling.reason) for telling in tellings(rig)),
        ["Candidates", *(f"  {name}" for name in candidates), *wrap(compared, "  ", "  ")],
    ]
    if rig.assumed:
        blocks.append(["Assumed"])
        for each in rig.assumed:
            blocks[-1] += wrap(told(each.message), "  ", "  ")
    if runs is not None:
        count = f"{len(runs)} run{'' if len(runs) == 1 else 's'}"
        blocks.append(wrap(f"{count}: {', '.join(clean(run) for run in runs)}"))
    return "\n\n".join("\n".join(block) for block in blocks)


def draw(rig: Rig) -> str:
    """Return the fin from base to tip with its sensors, to scale, as text.

    Names stand above their sensor where there is room for them. The fin's thickness is drawn in half lines,
    twice as high as a character is wide.
    """
    from rich.cells import cell_len

    seen = outline.trace(rig)
    columns, stretch, times = _scale(seen, rig.length)
    names, marks, free = [" "] * (DRAWING + 8), {}, 0
    for sensor in rig.fin_sensors():
        column = round((sensor.position or 0.0) / rig.length * (columns - 1))
        marks[column] = "●"
        label = clean(sensor.name)
        width = cell_len(label)
        if column >= free and column + width <= len(names):
            names[column : column + width] = [label, *[""] * (width - 1)]
            free = column + width + 1
    foot = "tube" if "inner_diameter" in rig.geometry else "plate" if rig.sensors_on("plate") else "base"
    x = (np.arange(columns) + 0.5) / columns * rig.length
    heights = seen.at(x) / rig.length * columns * stretch
    lines = [" " * 7 + "".join(names).rstrip(), *_rows(heights, marks, foot)]
    scale = f"{1e3 * rig.length:g} mm"
    lines.append(" " * 7 + f"0{scale:>{columns - 1}}")
    return "\n".join([*lines, *([" " * 7 + times] if times else [])])


def _scale(seen: outline.Outline, length: float) -> tuple[int, float, str]:
    """Return how many characters the length takes, and the factor that the thickness is drawn larger by.

    The factor comes as words, too, where it is not 1.
    """
    columns = min(DRAWING, max(SHORTEST, int(TALLEST * length / seen.largest)))
    half = seen.largest / length * columns
    if half > STOUTEST:
        times = next((n for n in STRETCHES if half <= n * STOUTEST), STRETCHES[-1])
        return columns, 1 / times, f"thickness drawn {times} times smaller"
    if np.ptp(seen.half) <= 1e-9 * seen.largest or half >= TAPER_SEEN:
        return columns, 1.0, ""
    times = next((n for n in STRETCHES if n * half >= TAPER_SEEN), STRETCHES[-1])
    return columns, float(times), f"thickness drawn {times} times larger"


def _rows(heights: NDArray[np.float64], marks: Mapping[int, str], foot: str) -> list[str]:
    """Return the lines of the fin: its middle with the sensors, and above and below it as many as it needs.

    Argument: heights (n,), half the fin's height at each character, in widths of a character.
    """
    levels = np.round(heights - 1).astype(int)  # half lines beyond the middle one
    count = -(-int(levels.max(initial=0)) // 2)
    above = []
    for row in range(count):
        line = "".join("█" if n >= 2 * row + 2 else "▄" if n == 2 * row + 1 else " " for n in levels)
        above.append(line)
    wall = "▌" if foot != "base" else "│"
    middle = "".join(marks.get(at, _axis(float(height))) for at, height in enumerate(heights))
    edge = f"{'':>5} {wall}"
    below = [line.replace("▄", "▀") for line in above]
    rows = [*(edge + line for line in reversed(above)), f"{foot:>5} {wall}{middle}│ tip"]
    return [line.rstrip() for line in (*rows, *(edge + line for line in below))]


def _axis(height: float) -> str:
    """Return the character of the fin's middle line where half its height is so many widths of it."""
    return "█" if height >= FULL else "═" if height >= THIN else "─"


def _labelled(texts: Iterable[tuple[str, str]]) -> list[str]:
    indent = 7
    return [line for name, text in texts for line in wrap(text, " " * indent, f"{name:<{indent}}")]


def _fin_texts(rig: Rig) -> Iterator[tuple[str, str]]:
    sizes = ", ".join(f"{name.replace('_', ' ')} {_shown(size)}" for name, size in rig.geometry.items())
    if rig.shape_file is not None:
        sizes = f"{clean(rig.shape_file.source.name, 40)}, length {1e3 * rig.length:g} mm"
    options = ", edges guarded" * rig.guarded_edges + ", slant surface" * rig.slant_surface
    yield "fin", f"{rig.profile_name}, {sizes}{options}"
    held = ""
    if rig.tip == "fixed":
        held = f" at {_shown(rig.tip_temperature) if rig.tip_temperature else 'an unknown temperature'}"
    compared = "not stated: candidates are compared" if rig.has_tip_face else "sharp: adiabatic"
    yield "tip", f"{rig.tip}{held}" if rig.tip else compared
    name = "" if rig.material is None else clean(rig.material, 40)
    if rig.conductivity is None:
        yield "k", "not stated: a wide prior"
    elif rig.handbook is not None:
        whose = f"of {rig.handbook.name} by the handbook at {ROOM - ZERO_CELSIUS:.0f} °C"
        yield "k", f"{_shown(rig.conductivity)}, {whose}"
    else:
        changing = (
            "" if rig.change is None else f", changing by {100 * rig.change.coefficient:.2g} % a kelvin"
        )
        yield "k", f"{_shown(rig.conductivity)}, stated{f' ({name})' if name else ''}{changing}"
    if rig.emissivity is not None:
        yield "ε", f"{_shown(rig.emissivity)}, stated: radiation apart from h"
    yield from _plate_texts(rig)
    if rig.expected_joint is not None:
        yield "joint", f"{_shown(rig.expected_joint)} when healthy"
    if rig.expected_coefficient is not None:
        yield "air", f"h {_shown(rig.expected_coefficient)} when healthy"
    yield from _air_texts(rig.surroundings)


def _plate_texts(rig: Rig) -> Iterator[tuple[str, str]]:
    """Yield what carries the fin."""
    if rig.plate is None:
        return
    bare, losses = rig.plate.bare_area, rig.plate.losses
    parts = [f"{rig.plate.fins} fin{'s' * (rig.plate.fins > 1)}"]
    parts += [] if bare is None else [f"{_shown(bare)} bare"]
    parts += [] if losses is None else [f"losses {_shown(losses)}"]
    yield "plate", ", ".join(parts)


def _air_texts(around: Surroundings) -> Iterator[tuple[str, str]]:
    """Yield what is known of the air, and of how the fin stands in it."""
    if around.driven is not None:
        stated = "" if around.speed is None else f", {_shown(around.speed)}"
        law = f", by {around.correlation}" if around.correlation else ""
        yield "air", f"driven{stated}{law}" if around.driven else f"still{law}"
    state = [
        f"{name} {_shown(each)}"
        for name, each in (
            ("pressure", around.pressure),
            ("humidity", around.humidity),
            ("temperature", around.air),
            ("surroundings", around.temperature),
        )
        if each is not None
    ]
    if state:
        yield "air", ", ".join(state)
    if around.orientation is not None:
        yield "axis", around.orientation


def _sensor_table(rig: Rig) -> list[str]:
    from rich.cells import cell_len

    rows = [("sensor", "reads", "at", "noise", "calibration")]
    for sensor in rig.sensors.values():
        place = "" if sensor.position is None else f"{1000 * sensor.position:g} mm"
        if sensor.position_sd:
            place += f" ± {1000 * sensor.position_sd:g} mm"
        rows.append((clean(sensor.name, 20), PLACES[sensor.place], place, *_uncertainties(sensor)))
    widths = [max(map(cell_len, column)) for column in zip(*rows, strict=True)]
    return [
        "  ".join(
            cell + " " * (width - cell_len(cell)) for cell, width in zip(row, widths, strict=True)
        ).rstrip()
        for row in rows
    ]


def _uncertainties(sensor: Sensor) -> tuple[str, str]:
    if sensor.exactly_known and sensor.calibration_relative is None:
        return "exact", "exact"
    unit = "W" if sensor.place in ("heat", "heater") else "K"
    noise = "estimated"
    if sensor.noise_relative is not None:
        noise = f"{100 * sensor.noise_relative:g} %"
    elif sensor.noise is not None:
        noise = f"{sensor.noise:g} {unit}"
    if sensor.calibration_class is not None:
        return noise, sensor.calibration_class.name
    if sensor.calibration_relative is not None:
        return noise, f"{100 * sensor.calibration_relative:g} %"
    return noise, f"{sensor.calibration:g} {unit}"


def _shown(quantity: Quantity) -> str:
    return clean(quantity.text, 40)
