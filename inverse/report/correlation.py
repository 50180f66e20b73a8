"""What a correlation says, in words: the frozen view that terminal and page both show."""

from collections.abc import Sequence
from dataclasses import dataclass

from finback.correlate import ABSCISSAE, Constant, Correlation, Outlier
from finback.report import phrases
from finback.report.terminal import wrap

MOST_SHOWN = 10
"""Outlying runs in the terminal's summary."""

WORDS = {
    "reynolds": "Nu = C Reⁿ Pr^(1/3)",
    "rayleigh": "Nu = C Raⁿ",
    "speed": "h = a + b Uⁿ, with h in W/(m² K) and U in m/s",
}
SEVERITIES = ("fault", "caution", "note")
INDENT = 10


@dataclass(frozen=True, slots=True)
class Row:
    """A constant: its `symbol`, `median` and 95 % `interval` with their unit, and standard deviation `sd`."""

    symbol: str
    median: str
    interval: str
    sd: str


@dataclass(frozen=True, slots=True)
class Published:
    """A published law: its name, and how the fitted one compares, in phrases."""

    name: str
    ratio: str
    interval: str
    ends: str
    verdict: str


@dataclass(frozen=True, slots=True)
class View:
    """Everything a reader is shown of a correlation, as text."""

    version: str
    title: str
    equation: str
    chosen: str
    status: str
    status_text: str
    range: str
    runs: str
    rows: tuple[Row, ...]
    scatter: str
    left_out: tuple[str, ...]
    outliers: tuple[tuple[str, str, str, str], ...]
    more_outliers: str
    published: tuple[Published, ...]
    not_compared: str
    out_of_range: tuple[tuple[str, str], ...]
    implied: str
    shared: str
    assumed: str
    findings: tuple[tuple[str, str, str], ...]
    provenance: tuple[tuple[str, str], ...]


def build(found: Correlation) -> View:
    """Return the view of a correlation."""
    from finback import __version__

    severity = {name: at for at, name in enumerate(SEVERITIES)}
    ranked = sorted(found.findings, key=lambda one: severity[one.severity])
    more = found.n_outliers - len(found.outliers)
    p = found.provenance
    return View(
        version=__version__,
        title=phrases.clean(found.title or str(p["results"])),
        equation=WORDS[found.form],
        chosen=found.why,
        status=found.status,
        status_text=phrases.STATUS[found.status],
        range=_range(found),
        runs=f"{len(found.runs)} runs",
        rows=tuple(_row(constant) for constant in found.constants.values()),
        scatter=_scatter(found.scatter),
        left_out=tuple(f"{number} left out: {reason}" for reason, number in found.left_out.items()),
        outliers=tuple(_outlier(one) for one in found.outliers),
        more_outliers=f"and {more} more, in correlation_runs.csv" if more > 0 else "",
        published=_published(found),
        not_compared="" if found.not_compared is None else f"Not compared: {found.not_compared}.",
        out_of_range=tuple((one.name, one.reason) for one in found.out_of_range),
        implied=_implied(found),
        shared=_shared(found),
        assumed="; ".join(found.notes),
        findings=tuple((one.severity, one.code, phrases.told(one.message)) for one in ranked),
        provenance=(
            ("results", f"{phrases.clean(str(p['results']))}, SHA-256 {p['results_sha256']}"),
            ("seed, draws", f"{p['seed']}, {p['draws']} ({p['method']})"),
            ("Finback", __version__),
        ),
    )


def summary(found: Correlation, folder: str | None = None) -> str:
    """Return the summary for a terminal, 79 columns wide; folder, where the result was written."""
    seen = build(found)
    blocks = [_heading(seen), _constants(seen)]
    if seen.left_out:
        blocks.append(["Left out", *_lines(seen.left_out)])
    if seen.outliers:
        blocks.append(_outlying(seen.outliers, found.n_outliers))
    blocks.append(_compared(seen))
    if seen.implied:
        blocks.append(["Implied speed", *wrap(seen.implied, "  ", "  ")])
    if seen.findings:
        told = [
            line
            for severity, code, message in seen.findings
            for line in wrap(f"{code}: {message}", " " * INDENT, f"  {severity:<8}")
        ]
        blocks.append(["Findings", *told])
    if folder is not None:
        blocks.append([f"Report  {phrases.clean(folder, 1000)}"])
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _heading(seen: View) -> list[str]:
    told = f"{seen.equation}, through {seen.runs}, {seen.range}: {seen.status_text.lower()}"
    return [*wrap(seen.title), *wrap(told), *wrap(f"(this form because {seen.chosen})")]


def _constants(seen: View) -> list[str]:
    lines = [f"{row.symbol:<8}= {row.median}, 95 % interval {row.interval}" for row in seen.rows]
    lines += wrap(seen.scatter, " " * INDENT, f"{'scatter':<8}= ")
    return lines + (wrap(seen.shared, "  ", "  ") if seen.shared else [])


def _lines(texts: Sequence[str]) -> list[str]:
    return [line for text in texts for line in wrap(text, "    ", "  ")]


def _outlying(outliers: Sequence[tuple[str, str, str, str]], total: int) -> list[str]:
    lines = [f"Outlying runs ({total})"]
    for run, probability, ratio, deviations in outliers[:MOST_SHOWN]:
        lines += wrap(f"{run}: {ratio}, {deviations}", " " * 12, f"{probability:>10}  ")
    if total > MOST_SHOWN:
        lines += wrap(f"and {total - MOST_SHOWN} more, in correlation_runs.csv", "  ", "  ")
    return lines


def _compared(seen: View) -> list[str]:
    lines = ["Published laws"]
    for law in seen.published:
        told = f"{law.name}: {law.ratio} times it (95 %: {law.interval}), {law.ends}; {law.verdict}"
        lines += wrap(told, "    ", "  ")
    for name, reason in seen.out_of_range:
        lines += wrap(f"out of range: {name}: {reason}", "    ", "  ")
    return lines + wrap(seen.not_compared, "  ", "  ")


def _range(found: Correlation) -> str:
    symbol, unit = ABSCISSAE[found.form]
    low, high = (phrases.number(value, 0.1 * value) for value in (found.band.x[0], found.band.x[-1]))
    return f"{symbol} from {low} to {high} {phrases.pretty(unit)}".rstrip()


def _row(constant: Constant) -> Row:
    half = (constant.high95 - constant.low95) / 2
    return Row(
        symbol=constant.name,
        median=phrases.number(constant.median, half, constant.unit),
        interval=phrases.span(constant.low95, constant.high95),
        sd=phrases.number(constant.sd, constant.sd),
    )


def _scatter(scatter: Constant) -> str:
    half = (scatter.high95 - scatter.low95) / 2
    text = phrases.number(100 * scatter.median, 100 * half)
    interval = phrases.span(100 * scatter.low95, 100 * scatter.high95)
    return f"{text} %, 95 % interval {interval} %, beside the stated errors"


def _outlier(one: Outlier) -> tuple[str, str, str, str]:
    return (
        phrases.clean(one.run),
        phrases.probability(one.probability),
        f"{one.ratio:.2f} times the law",
        f"{abs(one.deviations):.1f} standard deviations off",
    )


def _published(found: Correlation) -> tuple[Published, ...]:
    rows = []
    for one in found.compared:
        side = "above" if one.scatters > 0 else "below"
        off = abs(one.scatters)
        verdict = f"{off:.1f} of its scatters ({100 * one.scatter:.0f} %) {side}"
        rows.append(
            Published(
                name=one.name,
                ratio=f"{one.ratio:.2f}",
                interval=f"{one.low95:.2f} to {one.high95:.2f}",
                ends=f"{one.ratio_low:.2f} at the low end, {one.ratio_high:.2f} at the high",
                verdict=verdict,
            )
        )
    return tuple(rows)


def _implied(found: Correlation) -> str:
    ratio = found.implied_ratio()
    if ratio is None or found.implied is None:
        return ""
    middle, sd, runs = ratio
    return (
        f"By {found.implied.name}, the h of {runs} runs belongs to {middle:.2f} times the measured speed in "
        f"the median, from run to run ± {sd:.2f}; each run's speed is in correlation_runs.csv."
    )


def _shared(found: Correlation) -> str:
    names = {"h": "of h", "speed": "of the speed", "length": "of the characteristic length"}
    parts = [
        f"{phrases.number(100 * sd, 100 * sd)} % {names[of]}" for of, sd in found.shared.items() if sd > 0
    ]
    return f"The intervals hold errors that all runs share: {', '.join(parts)}." if parts else ""
