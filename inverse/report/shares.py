"""Shares: the uncertainty budget as the report tells it, for its table, its figure and the terminal."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from finback.estimate import BudgetKind, BudgetLine, Estimate, Improvement
from finback.report import phrases

SHOWN = ("h", "k", "joint", "h_over_k", "heat")
KINDS: Mapping[BudgetKind, str] = {
    "random": "random: averages out over readings",
    "systematic": "systematic: does not average out",
    "prior": "prior: known, or supposed, beforehand",
}
LEAST_TOLD = 0.01  # of the variance of any quantity, for a row of its own in the table
LEAST_DRAWN = 0.05  # for a piece of its own in the bars
LEAST_SAID = 0.1  # for a word in the terminal
MOST_SAID = 3
OTHERS = "others, each below 1 %"


@dataclass(frozen=True, slots=True)
class ShareRow:
    """One row: a source, or in front of its sources a kind with their sum; shares by quantity as text."""

    name: str
    is_kind: bool
    shares: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Shares:
    """The table: symbols of its columns, rows by kind."""

    symbols: tuple[str, ...]
    rows: tuple[ShareRow, ...]


@dataclass(frozen=True, slots=True)
class Piece:
    """One source in the bars: its letter, name, kind, and share of each quantity [%]."""

    letter: str
    name: str
    kind: BudgetKind
    percent: tuple[float, ...]


def table(estimate: Estimate) -> Shares | None:
    """Return the table of an estimate; None where there is nothing to share out."""
    names = quantities(estimate)
    if not names:
        return None
    rows = []
    for kind, words in KINDS.items():
        lines = [line for line in estimate.budget if line.kind == kind]
        told = [line for line in lines if _largest(line, names) >= LEAST_TOLD]
        others = [line for line in lines if line not in told]
        if not lines:
            continue
        rows.append(ShareRow(words, True, _texts(lines, names)))
        rows += [ShareRow(phrases.told(line.source), False, _texts([line], names)) for line in told]
        if others and told:
            rows.append(ShareRow(OTHERS, False, _texts(others, names)))
    return Shares(tuple(phrases.symbol(name) for name in names), tuple(rows))


def pieces(estimate: Estimate) -> tuple[tuple[str, ...], tuple[Piece, ...]]:
    """Return the quantities of the bars and their pieces, kind by kind; small ones of a kind are one."""
    names = quantities(estimate)
    found: list[tuple[str, BudgetKind, tuple[float, ...]]] = []
    for kind in KINDS:
        lines = [line for line in estimate.budget if line.kind == kind]
        drawn = [line for line in lines if _largest(line, names) >= LEAST_DRAWN]
        found += [(phrases.told(line.source), kind, _percent([line], names)) for line in drawn]
        rest = _percent([line for line in lines if line not in drawn], names)
        if max(rest, default=0.0) >= 100 * LEAST_TOLD:
            found.append((f"other {kind} ones", kind, rest))
    lettered = tuple(Piece(chr(ord("a") + i), *each) for i, each in enumerate(found))
    return names, lettered


def quantities(estimate: Estimate) -> tuple[str, ...]:
    """Return the quantities that are shown, as far as they are determined."""
    return tuple(n for n in SHOWN if any(n in line.share_of_variance for line in estimate.budget))


def in_words(estimate: Estimate) -> str:
    """Return one sentence on where the uncertainty of h, or else of h/k, is from; "" without a budget."""
    name = next((name for name in ("h", "h_over_k") if name in quantities(estimate)), None)
    if name is None:
        return ""
    lines = sorted(estimate.budget, key=lambda line: -line.share_of_variance.get(name, 0.0))[:MOST_SAID]
    parts = [
        f"{_text(share)} {phrases.told(line.source)}"
        for line in lines
        if (share := line.share_of_variance.get(name, 0.0)) >= LEAST_SAID
    ]
    return f"Variance of {phrases.symbol(name)}: {', '.join(parts)}."


def improved(improvement: Improvement | None) -> str:
    """Return the sentence on what would help most; "" where nothing helps much."""
    if improvement is None:
        return ""
    change, symbol = phrases.told(improvement.change), phrases.symbol(improvement.quantity)
    narrower = 100 * (1 - improvement.sd_ratio)
    return f"With {change} the interval of {symbol} would be {narrower:.0f} % narrower."


def _largest(line: BudgetLine, names: Sequence[str]) -> float:
    return max(line.share_of_variance.get(name, 0.0) for name in names)


def _percent(lines: Sequence[BudgetLine], names: Sequence[str]) -> tuple[float, ...]:
    return tuple(100 * sum(line.share_of_variance.get(name, 0.0) for line in lines) for name in names)


def _texts(lines: Sequence[BudgetLine], names: Sequence[str]) -> tuple[str, ...]:
    return tuple(_text(percent / 100) for percent in _percent(lines, names))


def _text(share: float) -> str:
    """Return a share in whole per cent; "< 1 %" for a small one."""
    return f"{100 * share:.0f} %" if share >= LEAST_TOLD else "< 1 %"
