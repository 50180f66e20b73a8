"""The ledger of a campaign: which runs there are, and what each came to, in one SQLite file.

A result is kept under a hash of everything that it hangs on, so that it is found again whatever becomes of
the files around it. What has been put in stays in when the power goes: a write-ahead log, synchronous FULL,
and one transaction for each block of results. One process at a time holds the ledger.
"""

import json
import re
import sqlite3
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from finback.errors import ComputationError, InputError

LAYOUT = "1"
"""Of the tables below; a ledger with another is not read."""
PATIENCE = 2.0  # s, for another process to let go of the ledger
DIGITS = 9  # figures of a number in a run's name that its place in the order goes by

TABLES = """
CREATE TABLE IF NOT EXISTS about (name TEXT PRIMARY KEY, value TEXT NOT NULL) WITHOUT ROWID;
CREATE TABLE IF NOT EXISTS results (
    key BLOB PRIMARY KEY, result TEXT NOT NULL, lasting INTEGER NOT NULL, posterior INTEGER NOT NULL
);
CREATE TABLE IF NOT EXISTS runs (
    id INTEGER PRIMARY KEY, source INTEGER NOT NULL, row INTEGER NOT NULL, name TEXT NOT NULL,
    shown TEXT NOT NULL, place TEXT NOT NULL, key BLOB, cells TEXT NOT NULL, extra TEXT NOT NULL, refused TEXT
);
CREATE INDEX IF NOT EXISTS runs_by_name ON runs (name, source);
"""

SELECT = (
    "SELECT id, shown, source, row, extra, runs.key, result, refused FROM runs "
    "LEFT JOIN results ON refused IS NULL AND results.key = runs.key"
)


@dataclass(frozen=True, slots=True)
class PlannedRun:
    """One run as it stands in a table.

    `source`: which of the files, by its number; `row` of that file; `name`; `key`, the hash of all that its
    result hangs on; `cells` of its sensors; `extra`, the table's other columns; `refused`, why it cannot be
    computed, or None.
    """

    source: int
    row: int
    name: str
    key: bytes
    cells: Sequence[str]
    extra: Sequence[str]
    refused: str | None = None


@dataclass(frozen=True, slots=True)
class Pending:
    """A run that has no result yet: its number in the plan, file, name, key and the cells of its sensors."""

    number: int
    source: int
    name: str
    key: bytes
    cells: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Entry:
    """A run with its result.

    `number` in the plan; `shown`, its name in tables; `source` and `row`, where it stands; `extra`; `key`.
    `result` is None where there is none yet; `refused` says why there never will be one.
    """

    number: int
    shown: str
    source: int
    row: int
    extra: tuple[str, ...]
    key: bytes
    result: dict[str, Any] | None
    refused: str | None


class Ledger:
    """The ledger in a file, which is made where it is missing. Use it in a `with` statement.

    Raises InputError where the file is no ledger or another process holds it, ComputationError where it can
    not be written, such as on a full disk; what was put in before stays.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        with self._told():
            self._base = sqlite3.connect(path, timeout=PATIENCE, isolation_level=None)
            self._base.execute("PRAGMA locking_mode = EXCLUSIVE")
            self._base.execute("PRAGMA journal_mode = WAL")
            self._base.execute("PRAGMA synchronous = FULL")
            self._base.create_function("place", 1, place_of, deterministic=True)
            self._base.executescript(TABLES)
            if self._about("layout", LAYOUT) != LAYOUT:
                problem = "this ledger was written by another version of Finback"
                raise InputError(path, None, problem, "choose another folder, or remove the file")

    def __enter__(self) -> "Ledger":
        return self

    def __exit__(self, *_: object) -> None:
        self._base.close()

    def belongs_to(self, campaign: str) -> bool:
        """Tell whether this is the ledger of a campaign; a new one becomes its ledger."""
        with self._told():
            return self._about("campaign", campaign) == campaign

    def plan(self, digest: str, labels: Sequence[str], runs: Iterable[PlannedRun]) -> None:
        """Set down which runs there are, unless it is the plan that stands here already.

        Arguments: digest of everything that the plan follows from; labels of the files, which tell runs of
        one name apart; runs, which are read only where they are needed. Of two runs of one file with the same
        name neither can be told, and both are refused.
        """
        with self._told():
            if self._about("plan") == digest:
                return
            self._base.execute("DELETE FROM about WHERE name = 'plan'")
            self._base.execute("DELETE FROM runs")
            pending = iter(runs)
            while self._add(pending):
                pass
            with self._transaction():
                self._name_apart(labels)
                self._base.execute("INSERT INTO about VALUES ('plan', ?)", (digest,))

    def _add(self, runs: Iterator[PlannedRun], most: int = 20_000) -> bool:
        """Add the next runs in one transaction; tell whether there were any."""
        with self._transaction():
            before = self._base.total_changes
            self._base.executemany(
                "INSERT INTO runs (source, row, name, shown, place, key, cells, extra, refused) "
                "VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
                (
                    (r.source, r.row, r.name, r.name, place_of(r.name), r.key, _text(r.cells), _text(r.extra),
                     r.refused)
                    for r, _ in zip(runs, range(most), strict=False)
                ),
            )  # fmt: skip
            return self._base.total_changes - before == most

    def _name_apart(self, labels: Sequence[str]) -> None:
        """Refuse runs that share a name within a file; name those that share one between files by both."""
        self._base.execute(
            "UPDATE runs SET refused = 'several runs of its file have this name; give each its own' "
            "WHERE refused IS NULL AND (name, source) IN "
            "(SELECT name, source FROM runs GROUP BY name, source HAVING COUNT(*) > 1)"
        )
        for source, label in enumerate(labels):
            self._base.execute(
                "UPDATE runs SET shown = ? || ': ' || name WHERE source = ? AND name IN "
                "(SELECT name FROM runs GROUP BY name HAVING COUNT(DISTINCT source) > 1)",
                (label, source),
            )
        self._base.execute("UPDATE runs SET place = place(shown) WHERE shown != name")

    def forget_failures(self) -> None:
        """Drop the results that may come out otherwise another time, such as of a worker that was killed."""
        with self._told(), self._transaction():
            self._base.execute("DELETE FROM results WHERE NOT lasting")

    def pending(self, after: int, most: int, posterior: bool = False) -> list[Pending]:
        """Return the next runs of one file that have no result, as they were read.

        Arguments: after, the number of the last run that was taken; most, how many; posterior, whether a
        result without a posterior on disk is none.
        """
        with self._told():
            rows = self._base.execute(
                "SELECT id, source, name, key, cells FROM runs WHERE id > ? AND refused IS NULL "
                "AND NOT EXISTS (SELECT 1 FROM results WHERE results.key = runs.key AND posterior >= ?) "
                "ORDER BY id LIMIT ?",
                (after, int(posterior), most),
            ).fetchall()
        return [
            Pending(number, source, name, key, tuple(json.loads(cells)))
            for number, source, name, key, cells in rows
            if source == rows[0][1]
        ]

    def acknowledge(self, results: Iterable[tuple[bytes, str, bool, bool]]) -> None:
        """Put in the results of a block in one transaction: all of them or none.

        Each is a key, the result as JSON, whether it would come out the same again, and whether its posterior
        is on disk.
        """
        with self._told(), self._transaction():
            self._base.executemany("INSERT OR REPLACE INTO results VALUES (?, ?, ?, ?)", results)

    def counts(self, posterior: bool = False) -> tuple[int, int]:
        """Return how many runs there are, and how many of them are done or refused."""
        with self._told():
            total, refused = self._base.execute("SELECT COUNT(*), COUNT(refused) FROM runs").fetchone()
            (done,) = self._base.execute(
                "SELECT COUNT(*) FROM runs JOIN results USING (key) WHERE refused IS NULL AND posterior >= ?",
                (int(posterior),),
            ).fetchone()
        return total, done + refused

    def entries(self, as_read: bool = False) -> Iterator[Entry]:
        """Yield every run with its result: by name as people count, or as they were read."""
        order = "source, row" if as_read else "place, shown, extra, source, row"
        with self._told():
            yield from map(_entry, self._base.execute(f"{SELECT} ORDER BY {order}"))

    def entry(self, number: int) -> Entry:
        """Return one run with its result by its number in the plan."""
        with self._told():
            return _entry(self._base.execute(f"{SELECT} WHERE id = ?", (number,)).fetchone())

    def _about(self, name: str, otherwise: str | None = None) -> str | None:
        """Return what the ledger says of itself; put in what it should say where it says nothing."""
        found = self._base.execute("SELECT value FROM about WHERE name = ?", (name,)).fetchone()
        if found is not None:
            return str(found[0])
        if otherwise is not None:
            self._base.execute("INSERT INTO about VALUES (?, ?)", (name, otherwise))
        return otherwise

    @contextmanager
    def _transaction(self) -> Iterator[None]:
        self._base.execute("BEGIN IMMEDIATE")
        try:
            yield
            self._base.execute("COMMIT")
        except BaseException:
            if self._base.in_transaction:  # a full disk has ended it already
                self._base.execute("ROLLBACK")
            raise

    @contextmanager
    def _told(self) -> Iterator[None]:
        """Turn what SQLite complains of into a sentence."""
        try:
            yield
        except sqlite3.OperationalError as error:
            if "locked" in str(error):
                problem = "another batch is at work in this folder"
                raise InputError(
                    self.path, None, problem, "wait for its end, or choose another folder"
                ) from None
            raise ComputationError(
                f"{self.path}: the ledger cannot be written ({error}); what is in it stays, and the same "
                "command goes on from there once there is room."
            ) from error
        except sqlite3.DatabaseError as error:
            if type(error) is not sqlite3.DatabaseError:  # one of the kinds that a defect of ours would be
                raise
            problem = f"this is no ledger of a campaign ({error})"
            raise InputError(
                self.path, None, problem, "choose another folder, or move the file away"
            ) from None


def place_of(name: str) -> str:
    """Return what orders names as people count: "run 9" before "run 10", capitals aside."""
    return re.sub(r"[0-9]+", lambda digits: digits[0].lstrip("0").rjust(DIGITS, "0"), name.casefold())


def _entry(row: tuple[int, str, int, int, str, bytes, str | None, str | None]) -> Entry:
    number, shown, source, at, extra, key, result, refused = row
    found = None if result is None else json.loads(result)
    return Entry(number, shown, source, at, tuple(json.loads(extra)), key, found, refused)


def _text(cells: Sequence[str]) -> str:
    return json.dumps(cells, ensure_ascii=False, separators=(",", ":"))
