"""The terminal summary of a diagnosis: plain text within 80 columns, the same in a terminal and in a file."""

from pathlib import Path

from finback.diagnosis import Diagnosis
from finback.report import diagnosis_view, phrases
from finback.report.terminal import COLUMNS, wrap

MOST_MEASUREMENTS = 3
BAR = 20  # columns of a probability's bar
INDENT = "  "
NAME, HEAT = 28, 24  # columns of the table of costs


def summary(found: Diagnosis, folder: Path | str | None = None) -> str:
    """Return the summary of a diagnosis.

    Arguments: found; folder the result was written to, None when it was not. Lines hold at most 79 columns,
    except the report's path; no colour codes and no character that a terminal would obey.
    """
    seen = diagnosis_view.build(found)
    blocks = [
        [*wrap(seen.title), *wrap(f"run {seen.run}: {seen.status_text.lower()}")],
        [*wrap(seen.headline), *wrap(seen.number), *wrap(seen.cost)],
        ["What to do", *wrap(seen.action, INDENT, INDENT)] if seen.action else [],
        _causes(seen),
        _costs(seen),
        _listed("What cannot be told apart", seen.cannot_tell),
        _faults("Readings", seen.faults),
        _next(seen),
        _listed("What could not be judged", seen.missing),
        _faults("Findings", seen.findings),
        _listed("", (f"Defaults were used ({len(seen.assumptions)}); the report lists them.",))
        if seen.assumptions
        else [],
        [] if folder is None else [f"Report  {phrases.clean(str(Path(folder) / 'report.html'), 1000)}"],
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _causes(seen: diagnosis_view.DiagnosisView) -> list[str]:
    lines = ["Causes"]
    for row in seen.causes:
        bar = "#" * round(BAR * float(row.percent) / 100)
        lines += wrap(f"{row.name}", " " * (15 + BAR), f"  {row.probability:>8} {bar:<{BAR}} ")
    return lines


def _costs(seen: diagnosis_view.DiagnosisView) -> list[str]:
    lines = [f"{'What it costs':<{NAME}}{'heat (95 %)':<{HEAT}}base temperature (95 %)"]
    for row in seen.costs:
        name = wrap(row.what, INDENT * 2, INDENT)
        heat, base = f"{row.heat} ({row.heat_interval})", f"{row.base} ({row.base_interval})"
        if len(heat) >= HEAT or len(base) > COLUMNS - NAME - HEAT:
            lines += [*name, *wrap(f"{heat}, {base}", INDENT * 2, INDENT * 2)]
        else:
            name += [""] * (len(name[-1]) >= NAME)
            lines += [*name[:-1], f"{name[-1]:<{NAME}}{heat:<{HEAT}}{base}"]
        if row.more:
            brought = " and ".join(part for part in (row.more, row.warmer) if part)
            lines += wrap(f"brings {brought}, if it is so", INDENT * 2, INDENT * 2)
    return lines


def _next(seen: diagnosis_view.DiagnosisView) -> list[str]:
    lines = ["To measure next", *wrap(seen.left, INDENT, INDENT)] if seen.next else []
    for number, row in enumerate(seen.next[:MOST_MEASUREMENTS], start=1):
        bits = "" if row.bits == phrases.NOTHING else f" ({row.bits})"
        told = f"{row.what}: {row.gain}{bits}; interval of h {row.narrower}."
        lines += wrap(told, INDENT * 3, f"{INDENT}{number}. ")
    return lines


def _listed(heading: str, sentences: tuple[str, ...]) -> list[str]:
    lines = [heading] if heading and sentences else []
    for sentence in sentences:
        lines += wrap(sentence, INDENT * 2, INDENT)
    return lines


def _faults(heading: str, rows: tuple[diagnosis_view.FaultRow, ...]) -> list[str]:
    lines = [heading] if rows else []
    for row in rows:
        lines += wrap(f"{row.code}: {row.message}", " " * 10, f"  {row.severity:<8}")
    return lines
