"""Run points: what each run of a table of results is on the axes of a form, with the errors of both.

Three forms: "reynolds", Nu = C Reⁿ Pr^(1/3); "rayleigh", Nu = C Raⁿ; "speed", h = a + b Uⁿ. Runs that failed,
or that lack a number, are left out and counted.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback import groups, quantity, results
from finback.errors import InputError
from finback.errors_in_variables import LEAST_RUNS, Points
from finback.findings import Finding
from finback.groups import Body, Warmths
from finback.models.air import AirProperties
from finback.quantity import Quantity
from finback.results import Results, Wanted
from finback.rig import Rig
from finback.wording import listed, quoted

Array = NDArray[np.float64]
Form = Literal["reynolds", "rayleigh", "speed"]

SPEEDS = ("speed", "velocity", "air_speed")
"""Names of the column of speed, where none is given."""

ROOM_PRANDTL = 0.707
"""Prandtl number of air at 300 K and one atmosphere [1]; 0.70 to 0.71 from 270 to 400 K."""

NORMAL_WIDTH = 2 * 1.959964
"""Width of a 95 % interval over the standard deviation [1]."""

LARGE_ERROR = 0.25
"""Relative standard uncertainty [1] from which a speed's error is no more the same up and down in
logarithms."""

LEAST_RANGE = 1e-3
"""Range of ln x below which all runs have the same abscissa."""


@dataclass(frozen=True, slots=True)
class Stated:
    """What is said on the command line of the errors and the columns.

    `speed`, the column of the speed, None for one of SPEEDS; `speed_sd`, its standard uncertainty; of
    both that of h and that of speed, the part that all runs share, `shared_h` and `shared_speed`, as shares
    of the value [1], None where nothing is said.
    """

    speed: str | None = None
    speed_sd: Quantity | None = None
    speed_sd_relative: bool = True
    shared_h: float | None = None
    shared_speed: float | None = None


@dataclass(frozen=True)
class RunPoints:
    """The runs on the axes of a form.

    `points`, in logarithms, with the errors that each run has for itself; `kept`, their places in the table;
    `left_out`, how many others by reason; `shared_x`, `shared_y`, standard deviations in ln x and ln y of
    errors that all share, and `shared_length` of the characteristic length; `h` [W/(m² K)], `speed` [m/s],
    with their standard uncertainties, where the table has them; `warm` and `beside`, how warm the runs are
    and the air's properties, and `body`, where there is a rig; `findings`.
    """

    form: Form
    points: Points
    kept: NDArray[np.intp]
    left_out: Mapping[str, int]
    shared_x: float
    shared_y: float
    shared_length: float
    h: Array | None
    h_sd: Array | None
    speed: Array | None
    speed_sd: Array | None
    warm: Warmths | None
    beside: AirProperties | None
    body: Body | None
    findings: tuple[Finding, ...]


def parse(speed: str | None, speed_sd: str | None, shared_h: str | None, shared_speed: str | None) -> Stated:
    """Return what the options of a command line say. Raises InputError for what is no uncertainty."""
    written = None if speed_sd is None else _uncertainty("--speed-uncertainty", speed_sd, "speed")
    shares = [
        None if text is None else _uncertainty(option, text, "relative").value
        for option, text in (("--shared-h", shared_h), ("--shared-speed", shared_speed))
    ]
    relative = speed_sd is None or speed_sd.rstrip().endswith("%")
    return Stated(speed, written, relative, *shares)


def parse_form(text: str | None) -> Form | None:
    """Return the form of that name, None for none. Raises InputError for another."""
    known: Mapping[str, Form] = {"reynolds": "reynolds", "rayleigh": "rayleigh", "speed": "speed"}
    if text is None:
        return None
    if text.strip().casefold() not in known:
        problem = f"there is no form {quoted(text)}"
        raise InputError(None, "--form", problem, f"choose one of {', '.join(known)}")
    return known[text.strip().casefold()]


def _uncertainty(option: str, text: str, dimension: Literal["speed", "relative"]) -> Quantity:
    """Return a standard uncertainty: a share in per cent, or else an amount of the dimension."""
    share = dimension == "relative" or text.rstrip().endswith("%")
    try:
        found = quantity.parse(text, "relative" if share else dimension)
    except InputError as error:
        raise InputError(None, option, error.problem, error.remedy) from None
    if not found.value >= 0 or (share and found.value >= 1):
        problem = f"{quoted(text)} is no uncertainty"
        raise InputError(None, option, problem, 'write one such as "5 %", of 0 to 100 %')
    return found


def wanted(speed: str | None) -> tuple[Wanted, ...]:
    """Return the columns that may be needed. Argument: speed, the column of the speed, None for the usual."""
    names = SPEEDS if speed is None else (speed,)
    return (
        Wanted("status", ("status",)),
        Wanted("rig", ("rig",)),
        Wanted("h", ("h_median", "h"), "coefficient", "W/(m^2 K)"),
        Wanted("h_sd", ("h_sd",), "coefficient", "W/(m^2 K)", sd=True),
        Wanted("h_low", ("h_low95",), "coefficient", "W/(m^2 K)"),
        Wanted("h_high", ("h_high95",), "coefficient", "W/(m^2 K)"),
        Wanted("speed", names, "speed", "m/s"),
        Wanted("speed_sd", tuple(f"{results.bare(name)}_sd" for name in names), "speed", "m/s", sd=True),
        Wanted("air", ("air_median", "air", "air_temperature"), "temperature", "degC"),
        Wanted("base", ("base_temperature_median", "base_temperature"), "temperature", "degC"),
        Wanted("base_sd", ("base_temperature_sd",), "temperature difference", "K"),
        Wanted("air_sd", ("air_sd",), "temperature difference", "K"),
        Wanted("surface", ("surface_temperature",), "temperature", "degC"),
        Wanted("efficiency", ("efficiency_median", "efficiency"), "number"),
        *(Wanted(name, (name,), "number") for name in ("Nu", "Re", "Ra", "Pr")),
        *(Wanted(f"{name}_sd", (f"{name}_sd",), "number", sd=True) for name in ("Nu", "Re", "Ra")),
    )


def choose(table: Results, rig: Rig | None) -> tuple[Form, str]:
    """Return the form that a table calls for, and why.

    Raises InputError where it has neither a speed nor a group to plot against.
    """
    has = set(table.numbers)
    if {"Re", "Nu"} <= has:
        return "reynolds", "the table has columns Re and Nu"
    if {"Ra", "Nu"} <= has:
        return "rayleigh", "the table has columns Ra and Nu"
    if "speed" in has and rig is not None:
        return "reynolds", "the table has a speed and the rig a length"
    if "speed" in has:
        return "speed", "the table has a speed, and no rig tells the length that Re is on"
    if rig is not None and not rig.surroundings.driven:
        return "rayleigh", "the table has no speed, and the rig's air is still"
    remedy = "add it, or name the column that holds it (--speed)"
    raise results.missing(table.source, SPEEDS[0], remedy)


def place(table: Results, form: Form, rig: Rig | None, stated: Stated) -> RunPoints:
    """Return the runs of a table on the axes of a form.

    Raises InputError for a column or a rig that is missing, for too few runs and for runs that are all alike.
    """
    numbers = dict(table.numbers)
    dimensionless = form != "speed" and {"Nu", "Re" if form == "reynolds" else "Ra"} <= set(numbers)
    if form != "speed" and rig is None and not dimensionless:
        problem = f"the form {form} needs the rig, which tells the length and the air of Nu"
        raise InputError(table.source, None, problem, "name it (--rig), or add columns of Nu and Re or Ra")
    if not dimensionless and "h" not in numbers:
        raise results.missing(table.source, "h", "add it: the results of a batch call it h_median")
    if form == "speed" or (form == "reynolds" and not dimensionless):
        _need_speed(table, stated)
    body = None if rig is None else groups.body(rig, driven=form != "rayleigh")
    findings: list[Finding] = []
    title = None if rig is None else rig.title
    findings += _of_rigs(table, title)
    kept, left_out = _sift(table, form, dimensionless, body is not None and not dimensionless, stated, title)
    numbers = {name: values[kept] for name, values in numbers.items()}
    _check_count(table, len(kept), left_out)
    warm, beside = None, None
    if body is not None and (not dimensionless or "air" in numbers):
        warm = _warm(table, numbers, len(kept), body)
        findings += warm.findings
        if np.isfinite(warm.film).all():
            beside = groups.properties(body.rig, warm)
        elif not dimensionless:
            kept, numbers, warm, left_out = _cold_out(kept, numbers, warm, left_out)
            _check_count(table, len(kept), left_out)
            beside = groups.properties(body.rig, warm)
        else:
            warm = None
    y, sy = _ordinate(numbers, form, dimensionless, table, body, beside, findings)
    x, sx = _abscissa(numbers, form, dimensionless, table, stated, body, warm, beside, findings)
    if np.ptp(x) < LEAST_RANGE:
        problem = f"all {len(x)} runs have the same {'speed' if form != 'rayleigh' else 'Ra'}"
        raise InputError(table.source, None, problem, "give runs that differ in it")
    findings += _of_errors(sx, form)
    shared_x, shared_y = (0.0 if part is None else part for part in (stated.shared_speed, stated.shared_h))
    if form == "rayleigh":
        shared_x = 0.0
    findings += _of_shared(stated, form, sx)
    own = Points(
        x, y, np.sqrt(np.maximum(sx**2 - shared_x**2, 0.0)), np.sqrt(np.maximum(sy**2 - shared_y**2, 0.0))
    )
    h_sd = None if "h" not in numbers else numbers["h"] * _relative_of_h(numbers, table)
    speed_sd = None
    if "speed" in numbers:
        speed_sd = numbers["speed"] * _relative_of_speed(numbers, table, stated, len(kept))
    return RunPoints(
        form, own, kept, left_out, shared_x, shared_y,
        0.0 if body is None or dimensionless or form == "speed" else body.length_sd,
        numbers.get("h"), h_sd, numbers.get("speed"), speed_sd, warm, beside, body, tuple(findings),
    )  # fmt: skip


def _need_speed(table: Results, stated: Stated) -> None:
    if "speed" not in table.numbers:
        name = stated.speed or SPEEDS[0]
        raise results.missing(table.source, name, "name the column that holds the speed (--speed)")


def _warm(table: Results, numbers: Mapping[str, Array], n: int, body: Body) -> Warmths:
    try:
        return groups.warmths(numbers, n, body.rig, body.driven)
    except InputError as error:
        raise InputError(table.source, error.place, error.problem, error.remedy) from None


def _sift(
    table: Results, form: Form, dimensionless: bool, warm: bool, stated: Stated, title: str | None
) -> tuple[NDArray[np.intp], dict[str, int]]:
    """Return the places of the runs that can be used, and how many cannot by reason, the first that holds."""
    numbers, n = table.numbers, len(table)
    good = np.ones(n, dtype=bool)
    left_out: dict[str, int] = {}

    def drop(reason: str, bad: NDArray[np.bool_]) -> None:
        now = good & bad
        if now.any():
            left_out[reason] = int(now.sum())
            good[now] = False

    def lacks(name: str) -> NDArray[np.bool_]:
        return ~(numbers[name] > 0)

    if "status" in table.text:
        status = np.array([cell.strip().casefold() == "failed" for cell in table.text["status"]], dtype=bool)
        drop("the run failed", status)
    if title is not None and title in table.text.get("rig", ()):
        drop("of another rig", np.array([cell.strip() != title for cell in table.text["rig"]], dtype=bool))
    if dimensionless:
        group = "Re" if form == "reynolds" else "Ra"
        drop("no Nu", lacks("Nu"))
        drop(f"no {group}", lacks(group))
    else:
        drop("no h", lacks("h"))
        if form != "rayleigh":
            drop("no speed", lacks("speed"))
    if "h_sd" in numbers and not dimensionless and not {"h_low", "h_high"} <= set(numbers):
        drop("no uncertainty of h", ~(numbers["h_sd"] >= 0))
    if form != "rayleigh" and stated.speed_sd is None and "speed_sd" in numbers and not dimensionless:
        drop("no uncertainty of speed", ~(numbers["speed_sd"] >= 0))
    for name in ("air", "surface") if warm else ():
        if name in numbers:
            drop("no temperature of the air or the fin", ~np.isfinite(numbers[name]))
    return np.flatnonzero(good), left_out


def _cold_out(
    kept: NDArray[np.intp], numbers: Mapping[str, Array], warm: Warmths, left_out: Mapping[str, int]
) -> tuple[NDArray[np.intp], dict[str, Array], Warmths, dict[str, int]]:
    """Return the runs whose film temperature is known alone."""
    known = np.isfinite(warm.film)
    reason = "no temperature of the air or the fin"
    counted = {**left_out, reason: left_out.get(reason, 0) + int((~known).sum())}
    cut = {name: values[known] for name, values in numbers.items()}
    return kept[known], cut, Warmths(warm.air[known], warm.surface[known], warm.findings), counted


def _check_count(table: Results, count: int, left_out: Mapping[str, int]) -> None:
    if count >= LEAST_RUNS:
        return
    reasons = "; ".join(f"{number} left out: {reason}" for reason, number in left_out.items())
    problem = f"{count} of {len(table)} runs can be used" + (f" ({reasons})" if reasons else "")
    raise InputError(table.source, None, problem, f"a law with scatter needs at least {LEAST_RUNS}")


def _ordinate(
    numbers: Mapping[str, Array],
    form: Form,
    dimensionless: bool,
    table: Results,
    body: Body | None,
    beside: AirProperties | None,
    findings: list[Finding],
) -> tuple[Array, Array]:
    """Return ln y of the runs and its standard uncertainty."""
    if dimensionless:
        y = np.log(numbers["Nu"])
        sy = _relative(numbers, table, "Nu", "Nu_sd")
        if sy is None:
            sy = _relative_of_h(numbers, table) if "h" in numbers else np.zeros_like(y)
    else:
        y, sy = np.log(numbers["h"]), _relative_of_h(numbers, table)
        if form != "speed":
            assert body is not None
            assert beside is not None
            y = y + np.log(body.place.length / np.asarray(beside.conductivity))
    if form == "reynolds":
        y = y - np.log(_prandtl(numbers, beside, findings)) / 3
    if not sy.any():
        message = "No uncertainty of h is stated: what the runs scatter is all taken as scatter of their own."
        findings.append(Finding("assumed", "note", message, evidence={"key": "h_sd"}))
    if form == "rayleigh" and body is not None and body.rig.emissivity is None:
        message = (
            "h holds what the fin radiates, which counts beside free convection: state the emissivity in the "
            "rig, so that h is convection alone."
        )
        findings.append(Finding("assumed", "caution", message, evidence={"key": "emissivity"}))
    return y, sy


def _prandtl(
    numbers: Mapping[str, Array], beside: AirProperties | None, findings: list[Finding]
) -> Array | float:
    if "Pr" in numbers and bool((numbers["Pr"] > 0).all()):
        return numbers["Pr"]
    if beside is not None:
        return np.asarray(beside.prandtl)
    message = f"No column tells Pr: it is taken as {ROOM_PRANDTL}, that of air at room temperature."
    findings.append(Finding("assumed", "note", message, evidence={"key": "Pr", "value": ROOM_PRANDTL}))
    return ROOM_PRANDTL


def _abscissa(
    numbers: Mapping[str, Array],
    form: Form,
    dimensionless: bool,
    table: Results,
    stated: Stated,
    body: Body | None,
    warm: Warmths | None,
    beside: AirProperties | None,
    findings: list[Finding],
) -> tuple[Array, Array]:
    """Return ln x of the runs and its standard uncertainty."""
    if form == "rayleigh":
        return _buoyancy(numbers, dimensionless, table, body, warm, beside, findings)
    n = len(next(iter(numbers.values())))
    if dimensionless:
        x = np.log(numbers["Re"])
        found = _relative(numbers, table, "Re", "Re_sd")
        sx = _relative_of_speed(numbers, table, stated, n) if found is None else found
    else:
        x, sx = np.log(numbers["speed"]), _relative_of_speed(numbers, table, stated, n)
        if form == "reynolds":
            assert body is not None
            assert beside is not None
            x = x + np.log(body.place.length / np.asarray(beside.kinematic_viscosity))
    if not sx.any():
        message = (
            "No uncertainty of the speed is stated: it is taken as exact, which makes n too small if it is "
            'not; state it with --speed-uncertainty "5 %", or in a column speed_sd.'
        )
        findings.append(Finding("assumed", "caution", message, evidence={"key": "speed_sd", "value": 0.0}))
    return x, sx


def _buoyancy(
    numbers: Mapping[str, Array],
    dimensionless: bool,
    table: Results,
    body: Body | None,
    warm: Warmths | None,
    beside: AirProperties | None,
    findings: list[Finding],
) -> tuple[Array, Array]:
    """Return ln Ra of the runs and its standard uncertainty, from that of the temperatures."""
    if dimensionless:
        x = np.log(numbers["Ra"])
        sx = _relative(numbers, table, "Ra", "Ra_sd")
    else:
        assert body is not None
        assert warm is not None
        assert beside is not None
        drive = np.abs(warm.surface - warm.air)
        if not (drive > 0).all():
            problem = "a run's fin is as warm as its air: nothing drives a flow along it"
            raise InputError(table.source, None, problem, "leave such runs out, or correct the temperatures")
        x = np.log(groups.rayleigh(warm, beside, body.place.length))
        sds = [numbers[name] for name in ("base_sd", "air_sd") if name in numbers]
        sx = np.nan_to_num(np.sqrt(sum(np.square(sd) for sd in sds))) / drive if sds else None
    if sx is None or not sx.any():
        message = (
            "No uncertainty of the temperatures is stated: Ra is taken as exact; state it in a column Ra_sd, "
            "or base_temperature_sd and air_sd."
        )
        findings.append(Finding("assumed", "note", message, evidence={"key": "Ra_sd", "value": 0.0}))
    return x, np.zeros_like(x) if sx is None else sx


def _relative(numbers: Mapping[str, Array], table: Results, value: str, sd: str) -> Array | None:
    """Return the relative standard uncertainties of a column, None where the table has none."""
    if sd not in numbers:
        return None
    given = np.nan_to_num(numbers[sd])
    return given if sd in table.shares else given / numbers[value]


def _relative_of_h(numbers: Mapping[str, Array], table: Results) -> Array:
    """Return the standard uncertainties of ln h: from the 95 % interval, else from the standard deviation."""
    found = _relative(numbers, table, "h", "h_sd")
    relative = np.zeros_like(numbers["h"]) if found is None else found
    if {"h_low", "h_high"} <= set(numbers):
        low, high = numbers["h_low"], numbers["h_high"]
        with np.errstate(invalid="ignore", divide="ignore"):
            width = np.log(high / low) / NORMAL_WIDTH
        return np.where((low > 0) & (high > low) & np.isfinite(width), width, relative)
    return relative


def _relative_of_speed(numbers: Mapping[str, Array], table: Results, stated: Stated, n: int) -> Array:
    """Return the standard uncertainties of ln speed: as stated beside the table, else from its column."""
    if stated.speed_sd is not None:
        if stated.speed_sd_relative:
            return np.full(n, stated.speed_sd.value)
        if "speed" not in numbers:
            problem = "an uncertainty in m/s needs a column of speed"
            raise InputError(table.source, "--speed-uncertainty", problem, "state it in per cent")
        return np.asarray(stated.speed_sd.value / numbers["speed"])
    found = _relative(numbers, table, "speed", "speed_sd") if "speed" in numbers else None
    return np.zeros(n) if found is None else found


def _of_errors(sx: Array, form: Form) -> Iterator[Finding]:
    large = int((sx > LARGE_ERROR).sum())
    if large:
        what = "Ra" if form == "rayleigh" else "the speed"
        message = (
            f"{large} runs have an uncertainty of {what} above {100 * LARGE_ERROR:.0f} %: an error of that "
            "size is not the same up and down on a logarithmic axis, and the law is less sure there than it "
            "says."
        )
        yield Finding("assumed", "caution", message, evidence={"key": "speed_sd", "value": float(sx.max())})


def _of_rigs(table: Results, title: str | None) -> Iterator[Finding]:
    """Yield that the runs are of several rigs, where it is not clear which are meant."""
    rigs = dict.fromkeys(cell.strip() for cell in table.text.get("rig", ()) if cell.strip())
    if len(rigs) > 1 and title not in rigs:
        message = (
            f"The runs are of {len(rigs)} rigs ({listed(rigs, 3)}), and are all taken as of one: give the "
            "rig of that title (--rig)."
        )
        yield Finding("assumed", "caution", message, evidence={"key": "rig"})


def _of_shared(stated: Stated, form: Form, sx: Array) -> Iterator[Finding]:
    """Yield what is not in the intervals because nobody stated it."""
    parts = []
    if stated.shared_h is None:
        parts.append("of h, such as that of an assumed k (--shared-h)")
    if form != "rayleigh" and stated.shared_speed is None:
        parts.append("of the speed, such as the anemometer's calibration (--shared-speed)")
    if parts:
        message = f"Errors that all runs share are not in the intervals unless stated: {' and '.join(parts)}."
        yield Finding("assumed", "note", message, evidence={"key": "shared"})
    if form != "rayleigh" and stated.shared_speed is not None and bool((sx < stated.shared_speed).any()):
        message = "The shared part of the speed's uncertainty is larger than all of it in some runs."
        yield Finding("assumed", "caution", message, evidence={"key": "shared_speed"})
