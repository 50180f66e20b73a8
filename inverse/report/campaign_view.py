"""What the page of a campaign shows, as strings: a frozen view, no arithmetic left for the template."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from finback import __version__, summaries
from finback.campaign import Campaign
from finback.campaign_digest import ALWAYS, DRIFTS, FAR, FEWEST, STEADY, Digest, Drift, SensorRecord
from finback.estimate import Summary
from finback.ledger import Entry, Ledger
from finback.report import method, phrases

MOST_SHOWN = 100
"""Runs that the page shows one by one: those that ask for a look first."""
MOST_REASONS = 15
SYSTEMATIC = 1.0  # mean residual in standard uncertainties, from which a sensor is said to be off
OFTEN = 0.1  # share of the runs with a finding that names a sensor, from which that is said
RESTLESS = 2.0  # root mean square of the same, from which its uncertainty is said to be too small
NOTHING_MUCH = 0.005  # mean residual in standard uncertainties that is as good as none
SMALLEST_P = 0.0001  # that is told
GRAVITY = ("note", "caution", "fault")


@dataclass(frozen=True, slots=True)
class Number:
    """A headline: a name, a value and a line beneath."""

    name: str
    value: str
    note: str


@dataclass(frozen=True, slots=True)
class Trend:
    """What is said of a quantity from run to run, and whether it drifts."""

    name: str
    verdict: str
    found: bool


@dataclass(frozen=True, slots=True)
class Row:
    """One line of a table, its cells in order; `severity` where it has one."""

    cells: tuple[str, ...]
    severity: str = ""


@dataclass(frozen=True, slots=True)
class Run:
    """One run that asks for a look: its line in the table, and its detail under `anchor`."""

    anchor: str
    name: str
    status: str
    values: tuple[str, ...]
    departure: str
    codes: str
    source: str
    candidate: str
    findings: tuple[tuple[str, str, str], ...]
    quantities: tuple[tuple[str, str, str], ...]
    residuals: str
    own: str


@dataclass(frozen=True, slots=True)
class View:
    """The page of a campaign."""

    title: str
    version: str
    status: str
    status_text: str
    numbers: tuple[Number, ...]
    verdicts: tuple[str, ...]
    trends: tuple[Trend, ...]
    order_note: str
    speed: str
    concerns: tuple[Run, ...]
    concern_note: str
    symbols: tuple[str, ...]
    findings: tuple[Row, ...]
    reasons: tuple[Row, ...]
    more_reasons: str
    sensors: tuple[Row, ...]
    sensor_note: str
    candidates: tuple[Row, ...]
    assumptions: tuple[str, ...]
    provenance: tuple[tuple[str, str], ...]
    cautions: tuple[str, ...]


def build(campaign: Campaign, digest: Digest, ledger: Ledger) -> View:
    """Return the view of a campaign, with its most concerning runs from the ledger."""
    failed = digest.statuses["failed"]
    caution = bool(digest.statuses["caution"] or failed)
    titles = list(dict.fromkeys(phrases.clean(source.rig.title) for source in campaign.sources))
    chosen, trends = digest.concerns(MOST_SHOWN), _trends(digest)
    return View(
        title="; ".join(titles[:3]) + ("; …" if len(titles) > 3 else ""),
        version=__version__,
        status="failed" if failed == digest.runs else "caution" if caution else "ok",
        status_text="Failed" if failed == digest.runs else "Done, with cautions" if caution else "Done",
        numbers=_numbers(digest),
        verdicts=tuple(
            trend.verdict for trend in sorted(trends, key=lambda each: not each.found) if trend.verdict
        ),
        trends=trends,
        order_note="In the order of the rows" + (", tables by name." if len(campaign.sources) > 1 else "."),
        speed=phrases.clean(digest.speed_column or ""),
        concerns=tuple(
            _run(campaign, ledger.entry(number), departure, at)
            for at, (number, departure) in enumerate(chosen, start=1)
        ),
        concern_note=_concern_note(digest, len(chosen)),
        symbols=tuple(
            f"{phrases.symbol(name)}, {phrases.pretty(summaries.describe(name)[1])}" for name in ALWAYS
        ),
        findings=_findings(digest),
        reasons=_reasons(digest),
        more_reasons=_more_reasons(digest),
        sensors=_sensors(campaign, digest),
        sensor_note=_sensor_note(digest),
        candidates=_candidates(digest),
        assumptions=tuple(
            dict.fromkeys(
                phrases.told(finding.message) for source in campaign.sources for finding in source.rig.assumed
            )
        ),
        provenance=_provenance(campaign),
        cautions=method.CAUTIONS,
    )


def _numbers(digest: Digest) -> tuple[Number, ...]:
    counted = ", ".join(f"{digest.statuses[name]:,} {name}" for name in ("ok", "caution", "failed"))
    found = [Number("runs", f"{digest.runs:,}", counted)]
    for name in ALWAYS:
        label, unit = phrases.told(summaries.describe(name)[0]), summaries.describe(name)[1]
        medians, sds = digest.series(name)
        told = np.isfinite(medians)
        if not told.any():
            found.append(Number(label, phrases.NOT_DETERMINED, "in none of the runs"))
            continue
        low, middle, high = (float(q) for q in np.quantile(medians[told], (0.05, 0.5, 0.95)))
        typical = float(np.median(sds[told]))
        value = f"{phrases.symbol(name)} = {phrases.number(middle, 2 * typical, unit)}"
        spread = f"median of {int(told.sum()):,} runs; 90 % of them {phrases.span(low, high, unit)}"
        found.append(Number(label, value, f"{spread}; ± {phrases.number(2 * typical, 2 * typical)} in one"))
    return tuple(found)


def _trends(digest: Digest) -> tuple[Trend, ...]:
    found = []
    for name in ALWAYS:
        drift = digest.drift(name) if name in STEADY else None
        found.append(Trend(name, _drift_in_words(digest, name, drift), drift is not None and drift.found))
    return tuple(found)


def _drift_in_words(digest: Digest, name: str, drift: Drift | None) -> str:
    """Return whether something drifts that should not; nothing is said of h, which people change."""
    label, unit = phrases.told(summaries.describe(name)[0]), summaries.describe(name)[1]
    if name not in STEADY:
        return ""
    if drift is None:
        told = int(np.isfinite(digest.series(name)[0]).sum())
        return f"{_upper(label)}: {told} runs tell it, and a drift is asked of {FEWEST} at least."
    width = float(np.nanmedian(digest.series(name)[1]))
    p = f"p = {drift.p_value:.2g}" if drift.p_value >= SMALLEST_P else f"p < {SMALLEST_P:g}"
    test = f"Spearman’s rank test, ρ = {drift.rank_correlation:.2f}, {p}"
    if not drift.found:
        return f"{_upper(label)} shows no drift from run to run ({test}; one is called at p < {DRIFTS:g})."
    change = f"from {phrases.number(drift.first, width, unit)} to {phrases.number(drift.last, width, unit)}"
    ratio = 100 * (drift.last / drift.first - 1)
    return (
        f"{_upper(label)} drifts, {change} ({ratio:+.1f} %; medians of the first and last tenth of the runs; "
        f"{test}): what should be one property of the rig changes with time, or with what else was changed."
    ).replace("-", "−")


def _upper(text: str) -> str:
    return text[:1].upper() + text[1:]


def _run(campaign: Campaign, entry: Entry, departure: float, at: int) -> Run:
    source, result = campaign.sources[entry.source], entry.result or {}
    quantities = {name: _summary(name, figures) for name, figures in result["quantities"].items()}
    ratios = sorted(result["residuals"].items(), key=lambda item: -abs(item[1][1]))
    codes = dict.fromkeys(code for code, severity, *_ in result["findings"] if severity != "note")
    own = zip(source.extra, entry.extra, strict=True)
    best, probability = result["best"]
    return Run(
        anchor=f"run-{at}",
        name=phrases.clean(entry.shown),
        status=result["status"],
        values=tuple(_in_short(quantities.get(name)) for name in ALWAYS),
        departure=f"{departure:.1f}",
        codes=", ".join(codes) or phrases.NOTHING,
        source=f"{phrases.clean(source.label)}, row {entry.row}",
        candidate=f"{best} ({phrases.probability(probability)})",
        findings=tuple(
            (severity, code, phrases.told(text)) for code, severity, _, text in result["findings"]
        ),
        quantities=tuple(
            (phrases.symbol(name), phrases.value(each), phrases.interval(each))
            for name, each in quantities.items()
            if each.median is not None or each.high95 is not None
        ),
        residuals=", ".join(f"{phrases.clean(name)} {ratio:+.1f}" for name, (_, ratio) in ratios[:6]).replace(
            "-", "−"
        ),
        own=phrases.clean("; ".join(f"{name}: {cell}" for name, cell in own if cell), 400),
    )


def _in_short(summary: Summary | None) -> str:
    """Return a quantity without its unit, for a column: value ± 2 sd, a limit, or nothing."""
    if summary is None or summary.high95 is None:
        return phrases.NOTHING
    if summary.median is None:
        return f"< {phrases.number(summary.high95, 0.1 * summary.high95)}"
    if summary.sd is None or not phrases.symmetric(summary):
        return phrases.median(summary, unit=False)
    return phrases.compact(summary.median, 2 * summary.sd)


def _summary(name: str, figures: Sequence[float | None]) -> Summary:
    median, sd, low, high = figures
    label, unit = summaries.describe(name)
    return Summary(name, label, unit, median, median, sd, low, high, None, None, "both")


def _concern_note(digest: Digest, shown: int) -> str:
    if not shown:
        return "No run has a caution or a fault, nor a k or a joint far from the others’."
    which = f"The first {shown} of {digest.concerning:,} runs" if digest.concerning > shown else "The runs"
    return (
        f"{which} with a caution or a fault, or with a k or joint more than {FAR:g} standard deviations from "
        "the median of all (departure: in standard deviations, the run’s own and the scatter of the runs "
        "together): the gravest findings first, then the most of them, then the departure. Every run is in "
        "results.csv; finback fit with --run NAME makes the whole report of one."
    )


def _findings(digest: Digest) -> tuple[Row, ...]:
    order = sorted(digest.findings.items(), key=lambda item: (-digest.gravity[item[0]], -item[1], item[0]))
    return tuple(
        Row((code, f"{count:,}", f"{100 * count / digest.runs:.1f} %"), GRAVITY[digest.gravity[code]])
        for code, count in order
    )


def _reasons(digest: Digest) -> tuple[Row, ...]:
    return tuple(
        Row((phrases.told(reason), f"{count:,}", phrases.clean(digest.examples[reason])))
        for reason, count in digest.reasons.most_common(MOST_REASONS)
    )


def _more_reasons(digest: Digest) -> str:
    more = len(digest.reasons) - MOST_REASONS
    return f"and {more} more kinds of reasons, in the column “message” of results.csv" if more > 0 else ""


def _sensors(campaign: Campaign, digest: Digest) -> tuple[Row, ...]:
    several = len({source.rig.title for source in campaign.sources}) > 1
    rows = []
    for (rig, name), record in digest.sensors.items():
        mean, spread = _mean_ratio(record), _spread(record)
        off = abs(mean) >= SYSTEMATIC or spread >= RESTLESS or _often_accused(record)
        known = {source.rig.title: source.rig for source in campaign.sources}[rig].sensors[name]
        unit = "K" if known.reads_temperature else "W"
        n = max(record.runs, 1)
        shown = (
            f"{phrases.clean(name)} ({phrases.clean(rig, 40)})" if several else phrases.clean(name),
            f"{record.runs:,}",
            "0" if abs(mean) < NOTHING_MUCH else f"{record.residuals / n:+.2g} {unit}".replace("-", "−"),
            f"{mean:+.2f}".replace("-", "−"),
            f"{spread:.2f}",
            f"{100 * record.beyond / n:.1f} %",
            f"{record.aside:,}",
            f"{record.unreadable:,}",
            ", ".join(f"{code} {count:,}" for code, count in record.findings.most_common())
            or phrases.NOTHING,
        )
        rows.append((-max(abs(mean), spread / RESTLESS), Row(shown, "caution" if off else "")))
    return tuple(row for _, row in sorted(rows, key=lambda each: (each[0], each[1].cells)))


def _often_accused(record: SensorRecord) -> bool:
    """Tell whether findings name a sensor in more runs than chance would."""
    return record.accused > max(2, OFTEN * record.runs)


def _mean_ratio(record: SensorRecord) -> float:
    return record.ratios / max(record.runs, 1)


def _spread(record: SensorRecord) -> float:
    return float(np.sqrt(record.squares / max(record.runs, 1)))


def _sensor_note(digest: Digest) -> str:
    by_size = sorted(digest.sensors.items(), key=lambda item: -abs(_mean_ratio(item[1])))
    off = [name for (_, name), each in by_size if abs(_mean_ratio(each)) >= SYSTEMATIC]
    accused = [(name, each) for (_, name), each in by_size if _often_accused(each)]
    restless = [name for (_, name), each in by_size if _spread(each) >= RESTLESS and name not in off]
    told = []
    if accused:
        counts = ", ".join(
            f"{phrases.clean(name)} ({each.accused:,} of {each.runs:,})" for name, each in accused
        )
        told.append(f"Found to be wrong in many runs: {counts}.")
    if off:
        others = "" if len(off) == 1 else "; the first draws the others the other way"
        told.append(f"Off in the same direction run after run: {', '.join(map(phrases.clean, off))}{others}.")
    if restless:
        names = ", ".join(map(phrases.clean, restless))
        told.append(f"Further off, now one way and now the other, than their stated uncertainty: {names}.")
    return " ".join(told) or "No sensor stands out across the runs."


def _candidates(digest: Digest) -> tuple[Row, ...]:
    return tuple(Row((name, f"{count:,}")) for name, count in digest.best.most_common())


def _provenance(campaign: Campaign) -> tuple[tuple[str, str], ...]:
    rigs = {source.rig.sha256: source.rig for source in campaign.sources}.values()
    files = [(rig.source.name, rig.sha256) for rig in rigs if rig.source is not None]
    files += [(source.label, source.table.sha256) for source in campaign.sources]
    shown = [(phrases.clean(name), f"SHA-256 {digest}") for name, digest in files[:50]]
    more = [("further files", str(len(files) - 50))] if len(files) > 50 else []
    return (("Finback", __version__), ("seed", str(campaign.seed)), *shown, *more)
