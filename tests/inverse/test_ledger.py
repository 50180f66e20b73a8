"""The ledger: what was put in stays, nothing else is computed again, and one process holds it."""

import json
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.errors import ComputationError, InputError
from finback.ledger import Ledger, PlannedRun, place_of


def planned(name: str, source: int = 0, row: int = 2, key: bytes | None = None) -> PlannedRun:
    return PlannedRun(source, row, name, key or f"{source}/{name}".encode(), ("1", "2"), ("x",))


def result(status: str = "ok") -> str:
    return json.dumps({"status": status})


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "ledger.sqlite"


def fill(ledger: Ledger, *names: str) -> None:
    ledger.plan("a plan", ["a.csv"], [planned(name, row=row) for row, name in enumerate(names, start=2)])


def test_a_result_is_found_again(path: Path) -> None:
    with Ledger(path) as ledger:
        fill(ledger, "a", "b", "c")
        assert [run.name for run in ledger.pending(0, 10)] == ["a", "b", "c"]
        ledger.acknowledge([(b"0/b", result(), True, False)])
    with Ledger(path) as ledger:
        fill(ledger, "a", "b", "c")
        assert [run.name for run in ledger.pending(0, 10)] == ["a", "c"]
        assert ledger.counts() == (3, 1)
        assert [entry.result for entry in ledger.entries()] == [None, {"status": "ok"}, None]


def test_a_new_plan_keeps_the_results_of_the_runs_that_are_the_same(path: Path) -> None:
    with Ledger(path) as ledger:
        fill(ledger, "a", "b")
        ledger.acknowledge([(b"0/a", result(), True, False)])
        ledger.plan("another", ["a.csv"], [planned("z"), planned("a")])
        assert [run.name for run in ledger.pending(0, 10)] == ["z"]


def test_the_same_plan_is_not_read_again(path: Path) -> None:
    def never() -> object:
        raise AssertionError
        yield

    with Ledger(path) as ledger:
        fill(ledger, "a")
        ledger.plan("a plan", ["a.csv"], never())


def test_a_block_holds_runs_of_one_file_alone(path: Path) -> None:
    with Ledger(path) as ledger:
        ledger.plan("p", ["a", "b"], [planned("x", 0), planned("y", 0), planned("z", 1)])
        first = ledger.pending(0, 10)
        assert [run.name for run in first] == ["x", "y"]
        assert [run.name for run in ledger.pending(first[-1].number, 10)] == ["z"]


def test_runs_of_one_name_in_a_file_are_both_refused(path: Path) -> None:
    with Ledger(path) as ledger:
        fill(ledger, "a", "b", "a")
        assert [run.name for run in ledger.pending(0, 10)] == ["b"]
        refused = [entry.refused for entry in ledger.entries()]
        assert refused[0] == refused[1] == "several runs of its file have this name; give each its own"


def test_runs_of_one_name_in_two_files_are_told_apart_by_the_file(path: Path) -> None:
    with Ledger(path) as ledger:
        runs = [planned("a", 0), planned("b", 0), planned("a", 1)]
        ledger.plan("p", ["one.csv", "two.csv"], runs)
        assert [entry.shown for entry in ledger.entries()] == ["b", "one.csv: a", "two.csv: a"]


def test_what_may_come_out_otherwise_is_forgotten(path: Path) -> None:
    with Ledger(path) as ledger:
        fill(ledger, "a", "b")
        ledger.acknowledge(
            [(b"0/a", result("failed"), False, False), (b"0/b", result("failed"), True, False)]
        )
        ledger.forget_failures()
        assert [run.name for run in ledger.pending(0, 10)] == ["a"]


def test_a_result_without_a_posterior_is_none_where_that_is_wanted(path: Path) -> None:
    with Ledger(path) as ledger:
        fill(ledger, "a", "b")
        ledger.acknowledge([(b"0/a", result(), True, False), (b"0/b", result(), True, True)])
        assert ledger.pending(0, 10) == []
        assert [run.name for run in ledger.pending(0, 10, posterior=True)] == ["a"]
        assert ledger.counts(posterior=True) == (2, 1)


def test_a_block_goes_in_as_a_whole_or_not_at_all(path: Path) -> None:
    with Ledger(path) as ledger:
        fill(ledger, "a", "b")
        with pytest.raises(sqlite3.ProgrammingError):
            ledger.acknowledge([(b"0/a", result(), True, False), (b"0/b", object(), True, False)])  # type: ignore[list-item]
        assert len(ledger.pending(0, 10)) == 2


def test_another_process_is_told_to_wait(path: Path) -> None:
    script = f"from finback.ledger import Ledger\nfrom pathlib import Path\nLedger(Path({str(path)!r}))"
    with Ledger(path) as ledger:
        fill(ledger, "a")
        other = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert "another batch is at work in this folder; wait for its end" in other.stderr


def test_a_file_that_is_no_ledger_is_refused(path: Path) -> None:
    path.write_bytes(b"run,h\n" * 1000)
    with pytest.raises(InputError, match="this is no ledger of a campaign"):
        Ledger(path)


def test_a_ledger_of_another_layout_is_refused(path: Path) -> None:
    with Ledger(path) as ledger:
        ledger._base.execute("UPDATE about SET value = '0' WHERE name = 'layout'")
    with pytest.raises(InputError, match="written by another version"):
        Ledger(path)


def fill_up(ledger: Ledger, names: list[str]) -> str:
    """Put in results until that is refused; return the sentence."""
    try:
        for name in names:
            ledger.acknowledge([(f"0/{name}".encode(), result() + " " * 1000, True, False)])
    except ComputationError as error:
        return str(error)
    return ""


def test_a_full_disk_is_a_sentence_and_leaves_the_ledger_whole(path: Path) -> None:
    names = [str(number) for number in range(400)]
    with Ledger(path) as ledger:
        fill(ledger, *names)
        pages = ledger._base.execute("PRAGMA page_count").fetchone()[0]
        ledger._base.execute(
            f"PRAGMA max_page_count = {pages + 20}"
        )  # SQLite then says what a full disk says
        complaint = fill_up(ledger, names)
        kept = ledger.counts()[1]
        assert "the ledger cannot be written (database or disk is full); what is in it stays" in complaint
        assert 0 < kept < len(names)
    with Ledger(path) as ledger:
        assert ledger._base.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        assert ledger.counts() == (400, kept)
        assert ledger.pending(0, 1)[0].name == names[kept]


def test_every_commit_reaches_the_disk(path: Path) -> None:
    with Ledger(path) as ledger:
        assert ledger._base.execute("PRAGMA journal_mode").fetchone() == ("wal",)
        assert ledger._base.execute("PRAGMA synchronous").fetchone() == (2,)  # FULL


@given(st.lists(st.integers(0, 10**8), min_size=2), st.sampled_from(["run ", "", "a7-"]))
def test_names_go_as_people_count(numbers: list[int], start: str) -> None:
    names = [f"{start}{number}" for number in numbers]
    assert sorted(names, key=place_of) == [f"{start}{number}" for number in sorted(numbers)]
