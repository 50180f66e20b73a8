"""The digest of a campaign: what can be said of all its runs together, gathered run by run.

Counts of runs, findings and reasons; how h, k and the joint went from run to run and whether they drift; how
each sensor fared; and which runs ask for a look first. A run costs some hundred bytes, however many columns
its table has.
"""

import math
import re
from array import array
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from finback.campaign import Source
from finback.ledger import Entry
from finback.table import to_number

Array = NDArray[np.float64]

FIGURES = ("median", "sd", "low95", "high95")
ALWAYS = ("h", "k", "joint")
"""Quantities that have a place even where no run tells them; those that are followed from run to run."""
STEADY = ("k", "joint")
"""What should be the same in every run of a rig."""
GRAVITY = {"note": 0, "caution": 1, "fault": 2}
SPEED = re.compile(r"speed|velocity|flow|wind|\brpm\b|reynolds|\bfan\b", re.IGNORECASE)
"""What the name of a column may hold that h is looked at against."""
_PLAIN = re.compile(r"[0-9.eE+\-\n]*")
MOST_COUNTED = (
    5.0  # standard uncertainties that a residual counts for, so that one run does not speak for all
)
FEWEST = 10  # runs of which a drift is asked
DRIFTS = 0.01  # p-value below which there is said to be one
TENTH = 10  # the first and the last part of the runs that a drift is measured by
NORMAL = 1.4826  # standard deviation of normal numbers over their median distance from the median
FAR = 3.0  # standard deviations, from which a departure is a concern
LONGEST_REASONS = 500


@dataclass
class SensorRecord:
    """How one sensor fared: runs, sums of residuals [K or W] and of their ratios to the uncertainty, cut off.

    `beyond`: runs with a residual of more than two standard uncertainties; `aside`: runs in which its reading
    was set aside; `accused`: runs with a finding that names it; `findings`: those, by code; `unreadable`:
    rows that failed by its cell.
    """

    runs: int = 0
    residuals: float = 0.0
    ratios: float = 0.0
    squares: float = 0.0
    beyond: int = 0
    aside: int = 0
    accused: int = 0
    unreadable: int = 0
    findings: Counter[str] = field(default_factory=Counter)


@dataclass(frozen=True, slots=True)
class Drift:
    """Whether a quantity changes in the order of the runs: Spearman's rank test.

    `rank_correlation`; `p_value` of none; `first` and `last`, medians of the first and the last tenth.
    Source: Spearman, American J. Psychology 15 (1904) 72; its normal approximation from ten runs on.
    """

    rank_correlation: float
    p_value: float
    first: float
    last: float

    @property
    def found(self) -> bool:
        """Whether there is one."""
        return self.p_value < DRIFTS


@dataclass
class Digest:
    """What was gathered of a campaign; `add` its entries in the order in which they were read."""

    sources: Sequence[Source]
    runs: int = 0
    sampled: int = 0
    statuses: Counter[str] = field(default_factory=Counter)
    findings: Counter[str] = field(default_factory=Counter)
    gravity: dict[str, int] = field(default_factory=dict)
    reasons: Counter[str] = field(default_factory=Counter)
    examples: dict[str, str] = field(default_factory=dict)
    by_source: Counter[int] = field(default_factory=Counter)
    best: Counter[str] = field(default_factory=Counter)
    quantities: set[str] = field(default_factory=lambda: set(ALWAYS))
    texts: set[str] = field(default_factory=set)
    sensors: dict[tuple[str, str], SensorRecord] = field(default_factory=dict)
    numbers: "array[int]" = field(default_factory=lambda: array("q"))
    gravities: "array[float]" = field(default_factory=lambda: array("d"))
    followed: dict[str, tuple["array[float]", "array[float]"]] = field(
        default_factory=lambda: {name: (array("d"), array("d")) for name in ALWAYS}
    )
    speeds: "array[float]" = field(default_factory=lambda: array("d"))
    _numeric: dict[int, list[tuple[int, str]]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        named = (name for source in self.sources for name in source.extra if SPEED.search(name))
        self.speed_column = next(named, None)

    def add_all(self, entries: Iterable[Entry]) -> "Digest":
        """Add entries and return the digest."""
        for entry in entries:
            self._add(entry)
        return self

    def _add(self, entry: Entry) -> None:
        source, result = self.sources[entry.source], entry.result or {}
        status = result.get("status", "failed")
        self.runs += 1
        self.by_source[entry.source] += 1
        self.statuses[status] += 1
        self.numbers.append(entry.number)
        self._note_own_columns(source, entry)
        quantities = result.get("quantities", {})
        self.quantities.update(quantities)
        for name, (medians, sds) in self.followed.items():
            median, sd = quantities.get(name, (None, None))[:2]
            medians.append(math.nan if median is None else median)
            sds.append(math.nan if sd is None else sd)
        if status == "failed":
            self._note_failure(source, entry)
            return
        self.sampled += bool(result.get("sampled"))
        self.best[result["best"][0]] += 1
        self._note_findings(source, result["findings"])
        for name, (residual, ratio) in result["residuals"].items():
            record = self._sensor(source, name)
            counted = min(max(ratio, -MOST_COUNTED), MOST_COUNTED)
            record.runs += 1
            record.residuals += residual * (counted / ratio if ratio else 1.0)
            record.ratios += counted
            record.squares += counted * counted
            record.beyond += abs(ratio) > 2.0
        for name in result["aside"]:
            self._sensor(source, name).aside += 1

    def _sensor(self, source: Source, name: str) -> SensorRecord:
        return self.sensors.setdefault((source.rig.title, name), SensorRecord())

    def _note_own_columns(self, source: Source, entry: Entry) -> None:
        """Look whether the table's own columns hold numbers alone, and take the speed if there is one."""
        if entry.source not in self._numeric:
            known = enumerate(source.extra)
            self._numeric[entry.source] = [(at, name) for at, name in known if name not in self.texts]
        cells = "\n".join([entry.extra[at] for at, _ in self._numeric[entry.source]])
        if not _all_numbers(cells.replace(",", ".") if source.table.decimal_comma else cells):
            self._look_closer(source, entry)
        speed = None
        if self.speed_column in source.extra:
            cell = entry.extra[source.extra.index(self.speed_column)]
            speed = to_number(cell, source.table.decimal_comma)
        self.speeds.append(math.nan if speed is None else speed)

    def _look_closer(self, source: Source, entry: Entry) -> None:
        kept = []
        for at, name in self._numeric[entry.source]:
            cell = entry.extra[at]
            if cell and to_number(cell, source.table.decimal_comma) is None:
                self.texts.add(name)
            else:
                kept.append((at, name))
        self._numeric[entry.source] = kept

    def _note_failure(self, source: Source, entry: Entry) -> None:
        reason = entry.refused or (entry.result or {}).get("reason", "it was not computed")
        kind = re.sub(r'"[^"]*"', '"…"', reason)
        if kind in self.reasons or len(self.reasons) < LONGEST_REASONS:
            self.reasons[kind] += 1
            self.examples.setdefault(kind, entry.shown)
        column = re.match(r"column (.*?): ", reason)
        if column and column[1] in source.rig.sensors:
            self._sensor(source, column[1]).unreadable += 1
        self.gravities.append(math.nan)

    def _note_findings(self, source: Source, findings: Sequence[Sequence[str]]) -> None:
        worst = 0.0
        for sensor in {sensor for _, _, sensor, _ in findings if sensor is not None}:
            self._sensor(source, sensor).accused += 1
        for code, severity, sensor, _ in findings:
            worst = max(worst, GRAVITY[severity]) + 0.01 * (severity != "note")
            self.gravity[code] = max(GRAVITY[severity], self.gravity.get(code, 0))
            if sensor is not None:
                self._sensor(source, sensor).findings[code] += 1
        self.findings.update({code for code, *_ in findings})
        self.gravities.append(worst)

    def series(self, name: str) -> tuple[Array, Array]:
        """Return medians and sds (n,) of h, k or the joint, in the order of the runs; nan where not told."""
        medians, sds = self.followed[name]
        return np.asarray(medians), np.asarray(sds)

    def departures(self) -> Array:
        """Return how far each run's k or joint is from that of the others of the campaign (n,).

        In standard deviations: the run's own and the scatter of all runs together; the larger of the two.
        """
        found = np.zeros(self.runs)
        for name in STEADY:
            medians, sds = self.series(name)
            told = np.isfinite(medians)
            if told.sum() < FEWEST:
                continue
            away = np.abs(medians - np.median(medians[told]))
            scatter = NORMAL * np.median(away[told])
            found = np.fmax(found, away / np.sqrt(np.square(sds) + scatter**2))
        return found

    def drift(self, name: str) -> Drift | None:
        """Return whether a quantity drifts, None for too few runs that tell it."""
        medians = self.series(name)[0]
        told = medians[np.isfinite(medians)]
        n = len(told)
        if n < FEWEST or np.ptp(told) == 0:
            return None
        ranks = _ranks(told) - (n - 1) / 2
        order = np.arange(n) - (n - 1) / 2
        correlation = float(ranks @ order / math.sqrt((ranks @ ranks) * (order @ order)))
        p_value = math.erfc(abs(correlation) * math.sqrt((n - 1) / 2))
        part = max(1, n // TENTH)
        return Drift(correlation, p_value, float(np.median(told[:part])), float(np.median(told[-part:])))

    def concerns(self, most: int) -> list[tuple[int, float]]:
        """Return the runs that ask for a look first: their numbers in the ledger, and their departures.

        Those with the gravest findings, then with the most of them, then those whose k or joint is furthest
        from the others'; at the end those without any finding, from FAR on.
        """
        gravities, departures = np.nan_to_num(np.asarray(self.gravities), nan=-1.0), self.departures()
        worth = (gravities >= GRAVITY["caution"]) | ((departures >= FAR) & (gravities >= 0))
        order = np.lexsort((np.arange(self.runs), -departures, -gravities))
        chosen = order[worth[order]][:most]
        return [(self.numbers[at], float(departures[at])) for at in chosen]

    @property
    def concerning(self) -> int:
        """How many runs have a caution or a fault, or a k or joint far from the others'."""
        gravities = np.nan_to_num(np.asarray(self.gravities), nan=-1.0)
        far = (self.departures() >= FAR) & (gravities >= 0)
        return int(((gravities >= GRAVITY["caution"]) | far).sum())


def _all_numbers(lines: str) -> bool:
    """Tell quickly whether every line is a number or empty; False where it takes a closer look."""
    if not _PLAIN.fullmatch(lines):
        return False
    try:
        for line in lines.split("\n"):
            float(line or "0")
    except ValueError:
        return False
    return True


def _ranks(values: Array) -> Array:
    """Return the ranks from 0 of values (n,), those that are alike sharing the mean of theirs."""
    _, place, counts = np.unique(values, return_inverse=True, return_counts=True)
    ends = np.cumsum(counts)
    return np.asarray((ends - (counts + 1) / 2)[place] + 0.0)
