"""The errors of Finback, in one tree.

    FinbackError
    ├── InputError         what the user gave is wrong: exit status 2
    ├── ComputationError   the input was read and the computation failed: exit status 1
    └── StoppedError       the user ended it, and what was done is kept: exit status 130

Each is one clear sentence: where, what is wrong, what would be right.
"""

from pathlib import Path


class FinbackError(Exception):
    """Anything Finback says no to; `str(error)` is the sentence for the user."""

    exit_status = 1


class InputError(FinbackError):
    """The input is wrong.

    Arguments: file the input came from, or None from Python; place inside it, such as "[fin] length" or
    "row 3, column T2", or None; problem, what is wrong; remedy, what would be right.
    """

    exit_status = 2

    def __init__(self, file: Path | str | None, place: str | None, problem: str, remedy: str) -> None:
        self.file, self.place, self.problem, self.remedy = file, place, problem, remedy
        where = ", ".join(str(part) for part in (file, place) if part)
        super().__init__(f"{where}: {problem}; {remedy}." if where else f"{problem}; {remedy}.")


class ComputationError(FinbackError):
    """The input was read and the computation failed; the sentence says what was tried."""


class StoppedError(FinbackError):
    """The user ended a long computation; the sentence says how far it came and how to go on."""

    exit_status = 130
