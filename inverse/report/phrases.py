"""Phrases: numbers and names as the reader sees them. Every string of the report passes through here.

Nothing here knows of HTML or of terminals; what the user gave is only made harmless as plain text (control
characters out), and each output escapes it in its own way.
"""

import math

from finback.estimate import DeterminedBy, Status, Summary

SYMBOLS = {
    "h": "h",
    "k": "k",
    "joint": "R″",
    "h_over_k": "h/k",
    "m": "m",
    "air": "T_air",
    "plate": "T_plate",
    "base_temperature": "T_b",
    "tip_temperature": "T_tip",
    "heat": "q_b",
    "efficiency": "η",
    "noise": "σ",
}
"""Symbol of a quantity by its name in estimate.json; others go by their name."""

DETERMINED_BY: dict[DeterminedBy, str] = {
    "readings": "the readings",
    "prior": "what was assumed beforehand, not by the readings",
    "both": "the readings together with what was stated",
}

STATUS: dict[Status, str] = {"ok": "Done", "caution": "Done, with cautions", "failed": "Failed"}

NOT_DETERMINED = "not determined"
NOTHING = "–"
SKEWED = 0.1  # share of the interval's width by which mean ± 2 sd may miss a limit before it is left out

_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def clean(text: str, longest: int = 200) -> str:
    """Return user-given text on one line, without control or direction characters, cut at `longest` characters."""
    line = " ".join(text.split())
    line = "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in line)
    return line if len(line) <= longest else line[: longest - 1] + "…"


def symbol(name: str) -> str:
    """Return the symbol of a parameter or derived quantity."""
    return SYMBOLS.get(name, name.replace("_", " "))


def pretty(unit: str) -> str:
    """Return a unit as it is printed: "W/(m^2 K)" as "W/(m² K)", "degC" as "°C", "1" as nothing."""
    text = unit.replace("^2", "²").replace("^3", "³").replace("degC", "°C")
    return "" if text in ("1", "dimensionless") else text


def numbers(values: tuple[float, ...], uncertainty: float) -> tuple[tuple[str, ...], str]:
    """Return values rounded to two significant digits of `uncertainty`, and the power of ten they share.

    The power is "" for everyday numbers and " × 10⁻⁵" otherwise. An uncertainty of 0 keeps five digits, and
    no zeros behind them.
    """
    largest = max(abs(v) for v in values)
    power = math.floor(math.log10(largest)) if largest and not 1e-2 <= largest < 1e6 else 0
    scaled = [v / 10**power for v in values]
    if uncertainty > 0:
        last = math.floor(math.log10(float(f"{uncertainty / 10**power:.1e}"))) - 1
    else:
        last = math.floor(math.log10(largest / 10**power)) - 4 if largest else 0
    last = min(last, 0 if power else last)
    texts = tuple(f"{round(v, -last) + 0.0:.{max(0, -last)}f}".replace("-", "−") for v in scaled)
    if not uncertainty > 0:
        texts = tuple(text.rstrip("0").rstrip(".") if "." in text else text for text in texts)
    return texts, f" × {ten(power)}" if power else ""


def ten(power: int) -> str:
    """Return a power of ten, "10⁻⁵"."""
    return f"10{str(power).translate(_SUPERSCRIPTS)}"


def number(value: float | None, uncertainty: float, unit: str = "") -> str:
    """Return one number with its unit, to two significant digits of its uncertainty; "–" for None."""
    if value is None:
        return NOTHING
    (text,), power = numbers((value,), uncertainty)
    return f"{text}{power} {pretty(unit)}".rstrip()


def plus_minus(value: float, expanded: float, unit: str) -> str:
    """Return "41.3 W/(m² K) ± 1.8 W/(m² K) (k = 2, 95 %)"; a temperature's uncertainty is in K."""
    (text, width), power = numbers((value, expanded), expanded)
    of_width = "K" if unit == "degC" else unit
    return f"{f'{text}{power} {pretty(unit)}'.rstrip()} ± {f'{width}{power} {pretty(of_width)}'.rstrip()} (k = 2, 95 %)"


def span(low: float, high: float, unit: str) -> str:
    """Return an interval, "39.6 to 43.1 W/(m² K)"."""
    (first, last), power = numbers((low, high), (high - low) / 2)
    text = f"({first} to {last}){power}" if power else f"{first} to {last}"
    return f"{text} {pretty(unit)}".rstrip()


def skewed(summary: Summary) -> bool:
    """Tell whether mean ± 2 sd would misstate a limit of the 95 % interval."""
    if summary.mean is None or summary.sd is None or summary.low95 is None or summary.high95 is None:
        return True
    allowed = SKEWED * (summary.high95 - summary.low95)
    misses = (summary.mean - 2 * summary.sd - summary.low95, summary.mean + 2 * summary.sd - summary.high95)
    return max(abs(miss) for miss in misses) > allowed


def value(summary: Summary) -> str:
    """Return the headline of a quantity.

    Mean ± two standard deviations of the posterior; the median alone where those would misstate the interval;
    "at most 23 W (95 %)" where only an upper limit is known; "not determined" where nothing is.
    """
    if summary.median is None:
        if summary.high95 is not None and not summary.low95:
            return f"at most {number(summary.high95, 0.1 * summary.high95, summary.unit)} (95 %)"
        return NOT_DETERMINED
    if summary.mean is None or not summary.sd or skewed(summary):
        return median(summary)
    return plus_minus(summary.mean, 2 * summary.sd, summary.unit)


def median(summary: Summary) -> str:
    """Return the posterior median with its unit, or "–"."""
    return number(summary.median, _half_width(summary), summary.unit)


def interval(summary: Summary) -> str:
    """Return the 95 % interval with its unit; "at most 23 W" with an upper limit only; "–" with none."""
    if summary.high95 is None:
        return NOTHING
    if not summary.low95 and summary.median is None:
        return f"at most {number(summary.high95, 0.1 * summary.high95, summary.unit)}"
    if summary.low95 is None:
        return NOTHING
    return span(summary.low95, summary.high95, summary.unit)


def least_squares(summary: Summary) -> str:
    """Return the least-squares value ± its standard error, or "–"."""
    if summary.least_squares is None:
        return NOTHING
    if not summary.standard_error:
        return number(summary.least_squares, _half_width(summary), summary.unit)
    (text, width), power = numbers((summary.least_squares, summary.standard_error), summary.standard_error)
    text = f"({text} ± {width}){power}" if power else f"{text} ± {width}"
    return f"{text} {pretty(summary.unit)}".rstrip()


def probability(p: float) -> str:
    """Return a probability in per cent, never a rounded 0 or 100."""
    if p > 0.9995 and p < 1:
        return "> 99.9 %"
    return f"{100 * p:.1f} %" if p >= 0.0005 or p == 0 else "< 0.1 %"


def _half_width(summary: Summary) -> float:
    if summary.low95 is not None and summary.high95 is not None and summary.high95 > summary.low95:
        return (summary.high95 - summary.low95) / 2
    return 2 * (summary.sd or 0.0)
