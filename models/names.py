"""Names that people write: compared without case and blanks, and the nearest ones where there is none."""

import difflib
import re
from collections.abc import Mapping


class UnknownNameError(ValueError):
    """A table has no row of that name.

    Arguments: kind, what the table holds, in the singular; name, as it was given; nearest, the names that
    resemble it, best first.
    """

    def __init__(self, kind: str, name: str, nearest: tuple[str, ...]) -> None:
        self.kind, self.name, self.nearest = kind, name, nearest
        *others, last = nearest
        near = f"{', '.join(others)} and {last}" if others else last
        super().__init__(f"no {kind} is called {name!r}; the nearest {'are' if others else 'is'} {near}")


def fold(name: str) -> str:
    """Return a name without what does not count: case, blanks, hyphens, slashes, commas; American spelling.

    >>> fold(" Aluminum 6061 - T6") == fold("aluminium 6061-T6")
    True
    """
    return re.sub(r"[\s\-_/,().]+", "", name.casefold()).replace("aluminum", "aluminium")


def nearest_names(name: str, table: Mapping[str, str], count: int) -> tuple[str, ...]:
    """Return the `count` names that resemble a name most, best first.

    Argument: table, from every name that counts to the one that is shown.
    """
    wanted = fold(name)
    best: dict[str, float] = {}
    for alias, shown in table.items():
        score = difflib.SequenceMatcher(None, wanted, fold(alias)).ratio()
        best[shown] = max(score, best.get(shown, 0.0))
    return tuple(sorted(best, key=lambda shown: (-best[shown], shown))[:count])
