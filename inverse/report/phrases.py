"""Phrases: numbers and names as the reader sees them. Every string of the report passes through here.

Nothing here knows of HTML or of terminals; what the user gave is only made harmless as plain text (control
characters out), and each output escapes it in its own way.
"""

import math

from finback.estimate import DeterminedBy, Expanded, Status, Summary
from finback.quantity import pretty_unit

SYMBOLS = {
    "h": "h",
    "k": "k",
    "joint": "R″",
    "h_over_k": "h/k",
    "m": "m",
    "joint_times_k": "R″·k",
    "air": "T_air",
    "plate": "T_plate",
    "base_temperature": "T_b",
    "tip_temperature": "T_tip",
    "exponent": "n",
    "emissivity": "ε",
    "surroundings": "T_sur",
    "bare_area": "A_bare",
    "loss": "Q_loss",
    "loss_coefficient": "G_loss",
    "heat": "q_b",
    "heat_convected": "q_air",
    "heat_radiated": "q_rad",
    "plate_heat": "Q",
    "base_heat_flux": "q″_b",
    "efficiency": "η",
    "effectiveness": "ε_f",
    "transverse_biot": "Bi",
    "misfit": "a",
    "noise": "σ",
}
"""Symbol of a quantity by its name in estimate.json; others go by their name."""

DETERMINED_BY: dict[DeterminedBy, str] = {
    "readings": "determined by the readings",
    "prior": "determined by what was known beforehand, not by the readings",
    "both": "determined by the readings together with what was known beforehand",
}
IN_SHORT: dict[DeterminedBy, str] = {"readings": "readings", "prior": "prior", "both": "both"}

STATUS: dict[Status, str] = {"ok": "Done", "caution": "Done, with cautions", "failed": "Failed"}

NOT_DETERMINED = "not determined"
NOTHING = "–"
COVERAGE = "(k = 2, 95 %)"
BENT = "†"  # marks a value ± U whose linear approximation does not hold
SKEWED = 0.1  # share of the interval's width by which mean ± 2 sd may miss a limit before it is left out

_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def clean(text: str, longest: int = 200) -> str:
    """Return user-given text on one line, with nothing unprintable, cut at `longest` characters."""
    line = " ".join(text.split())
    line = "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in line)
    return line if len(line) <= longest else line[: longest - 1] + "…"


def told(sentence: str) -> str:
    """Return a sentence of ours, which may hold names that the user gave, ready to print."""
    return clean(sentence, 500).replace("R''", "R″")


def symbol(name: str) -> str:
    """Return the symbol of a parameter or derived quantity."""
    return SYMBOLS.get(name, name.replace("_", " "))


def pretty(unit: str) -> str:
    """Return a unit as it is printed: "W/(m^2 K)" as "W/(m² K)", "degC" as "°C", "1" as nothing."""
    return "" if unit == "1" else pretty_unit(unit)


def numbers(values: tuple[float, ...], uncertainty: float) -> tuple[tuple[str, ...], str]:
    """Return values rounded to two significant digits of `uncertainty`, and the power of ten they share.

    The power is "" for everyday numbers and " × 10⁻⁵" otherwise. An uncertainty of 0 keeps five digits, and
    no zeros behind them.
    """
    largest = max(abs(uncertainty), *(abs(v) for v in values))
    power = math.floor(math.log10(largest)) if largest and not 1e-3 <= largest < 1e6 else 0
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


def number(value: float | None, uncertainty: float, unit: str = "1") -> str:
    """Return one number with its unit, to two significant digits of its uncertainty; "–" for None."""
    if value is None or not math.isfinite(value):
        return NOTHING
    (text,), power = numbers((value,), uncertainty)
    return f"{text}{power} {pretty(unit)}".rstrip()


def plus_minus(value: float, expanded: float, unit: str) -> str:
    """Return "41.3 W/(m² K) ± 1.8 W/(m² K)"; a temperature's uncertainty is in K."""
    (text, width), power = numbers((value, expanded), expanded)
    of_value, of_width = (f"{power} {pretty(u)}".rstrip() for u in (unit, "K" if unit == "degC" else unit))
    return f"{text}{of_value} ± {width}{of_width}"


def compact(value: float, width: float) -> str:
    """Return "41.3 ± 1.8", for a column whose unit stands elsewhere."""
    (text, of_width), power = numbers((value, width), width)
    return f"({text} ± {of_width}){power}" if power else f"{text} ± {of_width}"


def span(low: float, high: float, unit: str = "1") -> str:
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


def symmetric(summary: Summary) -> bool:
    """Tell whether a quantity may be stated as mean ± two standard deviations."""
    return summary.median is not None and bool(summary.sd) and not skewed(summary)


def value(summary: Summary) -> str:
    """Return the headline of a quantity.

    Mean ± two standard deviations of the posterior; the median alone where those would misstate the interval;
    "at most 23 W (95 %)" where only an upper limit is known; "not determined" where nothing is.
    """
    if summary.median is None:
        limit = interval(summary)
        return NOT_DETERMINED if limit == NOTHING else f"{limit} (95 %)"
    if summary.mean is None or summary.sd is None or not symmetric(summary):
        return median(summary)
    return plus_minus(summary.mean, 2 * summary.sd, summary.unit)


def determined_by(summary: Summary, short: bool = False) -> str:
    """Return what determined a quantity: a phrase, or one word; nothing where it is not determined."""
    if summary.median is None:
        return ""
    if summary.sd == 0:
        return "stated" if short else "exactly known, as the rig states"
    return (IN_SHORT if short else DETERMINED_BY)[summary.determined_by]


def median(summary: Summary, unit: bool = True) -> str:
    """Return the posterior median, or "–"."""
    return number(summary.median, _half_width(summary), summary.unit if unit else "1")


def interval(summary: Summary, unit: bool = True) -> str:
    """Return the 95 % interval; "at most 23 W" with an upper limit only; "–" with none or if exact."""
    name, high = summary.unit if unit else "1", summary.high95
    if high is None or summary.sd == 0:
        return NOTHING
    if not summary.low95 and summary.median is None:
        return f"at most {number(high, 0.1 * abs(high), name)}"
    return NOTHING if summary.low95 is None else span(summary.low95, high, name)


def expanded(stated: Expanded | None) -> str:
    """Return value ± U without unit, marked where its linear approximation does not hold; "–" without one."""
    if stated is None:
        return NOTHING
    return compact(stated.value, stated.expanded) + ("" if stated.linear else f" {BENT}")


def bent(stated: Expanded | None, unit: str) -> str:
    """Return the sentence on a value ± U that does not hold; "" where it does, or where there is none."""
    if stated is None or stated.linear:
        return ""
    told = plus_minus(stated.value, stated.expanded, unit)
    return f"too bent for linear propagation, which gives {told}: go by the interval"


def least_squares(summary: Summary) -> str:
    """Return the least-squares value ± its standard error, without unit, or "–"."""
    if summary.least_squares is None or summary.sd == 0:
        return NOTHING
    if not summary.standard_error:
        return number(summary.least_squares, _half_width(summary))
    return compact(summary.least_squares, summary.standard_error)


def probability(p: float, alone: bool = False) -> str:
    """Return a probability in per cent: never a rounded 0, and 100 only for a candidate that is alone."""
    if p > 0.9995 and not alone:
        return "> 99.9 %"
    return f"{100 * p:.1f} %" if p >= 0.0005 else "< 0.1 %"


def _half_width(summary: Summary) -> float:
    if summary.low95 is not None and summary.high95 is not None and summary.high95 > summary.low95:
        return (summary.high95 - summary.low95) / 2
    return 2 * (summary.sd or 0.0)
