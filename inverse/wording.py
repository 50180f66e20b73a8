"""Wording of refusals: how the user's own text is shown in a sentence, and which known name it is nearest to.

What the user wrote is shown short and without control characters, so that no file can write to a terminal.
"""

import difflib
from collections.abc import Iterable

SHOWN = 40
"""Characters of the user's text that a sentence shows."""


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
    """Return the known name most like this one, capitals aside, or None when none is like it."""
    by_key: dict[str, str] = {}
    for candidate in known:
        by_key.setdefault(candidate[:80].casefold(), candidate)
    found = difflib.get_close_matches(name[:80].casefold(), by_key, n=1, cutoff=cutoff)
    return by_key[found[0]] if found else None
