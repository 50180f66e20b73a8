"""Campaigns that are cut off: fifty kills at random moments, an interrupt, a disk that fills up.

The command itself is run, with worker processes, as a user would.
"""

import os
import resource
import signal
import sqlite3
import subprocess
import sys
import time
from contextlib import closing
from pathlib import Path

import numpy as np
import pytest
from campaigns import rows, text, write

RUNS, KILLS = 1000, 50
LIMIT = 120_000  # bytes of the largest file on what stands for a small disk

pytestmark = pytest.mark.slow


def command(folder: Path, out: str, *options: str) -> list[str]:
    given = [sys.executable, "-m", "finback", "batch", str(folder / "rig.toml"), str(folder / "readings.csv")]
    return [*given, "--out", str(folder / out), "--quiet", *options]


def acknowledged(ledger: Path) -> dict[bytes, tuple[int, str]]:
    """Return what a ledger holds: the place and the text of each result by its key; it must be whole."""
    if not ledger.exists():
        return {}
    with closing(sqlite3.connect(ledger)) as base:
        assert base.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        if not base.execute("SELECT 1 FROM sqlite_master WHERE name = 'results'").fetchone():
            return {}
        found = base.execute("SELECT key, rowid, result FROM results").fetchall()
    return {key: (place, result) for key, place, result in found}


def children(process: int) -> list[int]:
    """Return the processes that one has started, on Linux; nothing elsewhere."""
    listed = Path(f"/proc/{process}/task/{process}/children")
    return [int(each) for each in listed.read_text().split()] if listed.exists() else []


def all_gone(processes: list[int], patience: float = 20.0) -> bool:
    end = time.monotonic() + patience
    while any(Path(f"/proc/{each}").exists() for each in processes):
        if time.monotonic() > end:
            return False
        time.sleep(0.05)
    return True


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A rig with a thousand runs."""
    found = tmp_path_factory.mktemp("campaign")
    write(found, readings=text(rows(RUNS)))
    return found


@pytest.fixture(scope="module")
def seconds(folder: Path) -> float:
    """How long an undisturbed campaign takes [s]; its tables are then in the folder."""
    start = time.monotonic()
    subprocess.run(command(folder, "undisturbed"), check=True)
    return time.monotonic() - start


def test_fifty_kills_lose_nothing_and_repeat_nothing(folder: Path, seconds: float) -> None:
    ledger = folder / "killed" / "ledger.sqlite"
    random, before, counts = np.random.default_rng(6), {}, []
    for _ in range(KILLS):
        process = subprocess.Popen(command(folder, "killed", "--workers", "2", "--block", "3"))
        time.sleep(random.uniform(0.0, seconds / 6))
        workers = children(process.pid)
        process.send_signal(signal.SIGKILL)
        process.wait()
        assert all_gone(workers), "workers outlive the process that started them"
        now = acknowledged(ledger)
        assert before.items() <= now.items()  # nothing lost, and nothing put in a second time
        before = now
        counts.append(len(now))
    assert len({count for count in counts if 0 < count < RUNS}) > 5, "hardly any kill was under way"
    subprocess.run(command(folder, "killed"), check=True)
    assert before.items() <= acknowledged(ledger).items()
    for name in ("results.csv", "results.parquet"):
        assert (folder / "killed" / name).read_bytes() == (folder / "undisturbed" / name).read_bytes()


def test_an_interrupt_is_a_sentence_and_the_same_command_goes_on(folder: Path, seconds: float) -> None:
    line = command(folder, "interrupted", "--block", "3")
    process = subprocess.Popen(line, stderr=subprocess.PIPE, text=True, start_new_session=True)
    time.sleep(seconds / 2)
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: to the workers as well
    _, told = process.communicate(timeout=60)
    assert process.returncode == 130
    assert told.count("\n") == 1
    assert "runs are done and kept; the same command goes on from there." in told
    before = acknowledged(folder / "interrupted" / "ledger.sqlite")
    assert f"interrupted: {len(before)} of {RUNS} runs" in told
    subprocess.run(line, check=True)
    assert before.items() <= acknowledged(folder / "interrupted" / "ledger.sqlite").items()
    assert (folder / "interrupted" / "results.csv").read_bytes() == (
        folder / "undisturbed" / "results.csv"
    ).read_bytes()


@pytest.mark.usefixtures("seconds")
def test_a_disk_that_fills_up_is_a_sentence_and_the_same_command_goes_on(folder: Path) -> None:
    def small_files() -> None:
        resource.setrlimit(resource.RLIMIT_FSIZE, (LIMIT, LIMIT))

    line = command(folder, "full")
    first = subprocess.run(line, stderr=subprocess.PIPE, text=True, preexec_fn=small_files, check=False)
    assert first.returncode == 1
    assert first.stderr.count("\n") == 1
    assert "the ledger cannot be written" in first.stderr
    assert "what is in it stays, and the same command goes on from there" in first.stderr
    acknowledged(folder / "full" / "ledger.sqlite")
    subprocess.run(line, check=True)
    assert (folder / "full" / "results.csv").read_bytes() == (
        folder / "undisturbed" / "results.csv"
    ).read_bytes()
