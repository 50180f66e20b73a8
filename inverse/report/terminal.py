"""The terminal summary of a fit: plain text within 80 columns, the same in a terminal and in a file."""

from pathlib import Path

from finback.estimate import Estimate
from finback.report import phrases, shares, view

COLUMNS = 79
SYMBOL = 5  # columns of the symbol before its value


def summary(estimate: Estimate, folder: Path | str | None = None) -> str:
    """Return the summary of an estimate.

    Arguments: estimate; folder the result was written to, None when it was not. Lines hold at most 79
    columns, except the report's path, which stays in one piece; no colour codes and no character that a
    terminal would obey.
    """
    seen = view.build(estimate)
    blocks = [_heading(seen), *(_answer(answer) for answer in seen.answers)]
    if seen.shares is not None:
        told = f"{shares.in_words(estimate)} {seen.improvement}"
        blocks.append(["Uncertainty", *wrap(told, "  ", "  ")])
    blocks.append(_candidates(seen))
    if seen.parts:
        blocks.append(["Heat", *wrap(seen.parts, "  ", "  ")])
    if seen.healthy is not None:
        blocks.append(["Healthy fin", *wrap(seen.healthy.verdict, "  ", "  ")])
    blocks.append(_findings(seen))
    if folder is not None:
        blocks.append([f"Report  {phrases.clean(str(Path(folder) / 'report.html'), 1000)}"])
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _heading(seen: view.View) -> list[str]:
    return [*wrap(seen.title), *wrap(f"run {seen.run}: {seen.status_text.lower()}")]


def _answer(answer: view.Answer) -> list[str]:
    indent = " " * (SYMBOL + 3)
    lines = wrap(
        f"{answer.value} {answer.coverage}", indent, f"{answer.symbol:<{SYMBOL}}{answer.relation:>3}"
    )
    if answer.median != phrases.NOTHING:
        lines += wrap(f"median {answer.median}, 95 % interval {answer.interval}", indent, indent)
    lines += wrap(answer.label, indent, indent)
    if answer.determined_by:
        lines += wrap(answer.determined_by, indent, indent)
    if answer.bent:
        lines += wrap(answer.bent, indent, indent)
    if answer.reason:
        lines += wrap(answer.reason, indent, indent)
    return lines


def _candidates(seen: view.View) -> list[str]:
    lines = ["Candidates"] if seen.candidates else []
    for candidate in seen.candidates:
        lines += wrap(candidate.name, " " * 10, f"{candidate.probability:>8}  ")
    return lines + wrap(seen.verdict, "  ", "  ") + wrap(seen.compared, "  ", "  ")


def _findings(seen: view.View) -> list[str]:
    told = {answer.reason for answer in seen.answers}
    findings = [row for row in seen.findings if row.severity != "note" or row.message not in told]
    lines = ["Findings"] if findings or seen.assumptions else []
    for finding in findings:
        lines += wrap(f"{finding.code}: {finding.message}", " " * 10, f"  {finding.severity:<8}")
    if seen.assumptions:
        lines += wrap(f"Defaults were used ({len(seen.assumptions)}); the report lists them.", "  ", "  ")
    return lines


def wrap(text: str, hanging: str = "", first: str = "") -> list[str]:
    """Return a text in lines of at most COLUMNS columns, wide characters counted as two.

    Arguments: text; hanging, the indent of all lines but the first; first, that of the first.
    """
    from rich.cells import cell_len

    lines, line = [], first
    empty = True
    for word in text.split():
        gap = "" if empty else " "
        if not empty and cell_len(line + gap + word) > COLUMNS:
            lines.append(line)
            line, gap = hanging, ""
        line, empty = line + gap + word, False
        while cell_len(line) > COLUMNS:  # a word longer than a line
            cut = next(i for i in range(len(line), 0, -1) if cell_len(line[:i]) <= COLUMNS)
            lines.append(line[:cut])
            line = hanging + line[cut:]
    return [*lines, line] if not empty else lines
