"""Wording of refusals: how the user's own text is shown in a sentence, and which known name it is nearest to.

What the user wrote is shown short and without control characters, so that no file can write to a terminal.
"""

import difflib
import re
from collections.abc import Iterable
from itertools import islice

SHOWN = 40
"""Characters of the user's text that a sentence shows."""

MOST_COMPARED = 5000
"""Names among which the nearest is looked for: enough for a rig, a limit for a table of a million runs."""

_SAME_SHAPE = 0.01


def plain(text: object, most: int = SHOWN) -> str:
    """Return the text cut to so many characters, with "?" for anything that cannot be printed."""
    start = str(text)[: most + 1]
    shown = "".join(character if character.isprintable() else "?" for character in start)
    return f"{shown[: most - 1]}…" if len(shown) > most else shown


def quoted(text: object) -> str:
    """Return the text in double quotes, as `plain` shows it."""
    return f'"{plain(text)}"'


def listed(names: Iterable[str], most: int = 5) -> str:
    """Return the first names, each in quotes, separated by commas; "…" stands for the rest."""
    every = list(names)
    return ", ".join([quoted(name) for name in every[:most]] + ["…"] * (len(every) > most))


def nearest(name: str, known: Iterable[str], cutoff: float = 0.6) -> str | None:
    """Return the known name most like this one, capitals aside, or None when none is like it.

    Of two that are equally like it, one with digits in the same places wins: "T3" for "T7", not "TA".
    """
    wanted = name[:SHOWN].casefold()
    matcher = difflib.SequenceMatcher(None, b=wanted)
    best, best_score = None, cutoff
    for candidate in islice(known, MOST_COMPARED):
        other = candidate[:SHOWN].casefold()
        matcher.set_seq1(other)
        if matcher.real_quick_ratio() + _SAME_SHAPE < best_score:
            continue
        score = matcher.ratio() + _SAME_SHAPE * (_shape(other) == _shape(wanted))
        if score > best_score or (best is None and score == best_score):
            best, best_score = candidate, score
    return best


def _shape(name: str) -> str:
    return re.sub(r"[0-9]", "0", re.sub(r"[^0-9]", "a", name))
