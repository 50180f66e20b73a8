"""Invented campaigns, and pools that compute them in this process or die of them."""

import os
import signal
from collections.abc import Callable, Sequence
from concurrent.futures import Future
from functools import cache
from pathlib import Path

import numpy as np
from rigs import Truth, draw

from finback import campaign, campaign_table, rig
from finback.campaign_block import Answer, Block, Record, failed
from finback.campaign_workers import Processes

RIG = """title = "An invented pin with four holes"
[fin]
profile = "pin"
length = "120 mm"
diameter = "8 mm"
tip = "convective"
[material]
conductivity = "167 W/(m K) +/- 5 %"
[sensors.defaults]
noise = "0.15 K"
calibration = "0.1 K"
position = "0.3 mm"
[sensors]
T1 = { at = "5 mm" }
T2 = { at = "35 mm" }
T3 = { at = "65 mm" }
T4 = { at = "112 mm" }
TA = { on = "air" }
Q = { on = "heat", noise = "3 %", calibration = "1 %" }
"""
SENSORS = ("T1", "T2", "T3", "T4", "TA", "Q")
KILLER = "the run that kills"
NOTHING = (
    '{"status":"ok","quantities":{},"best":["none",1.0],'
    '"findings":[],"residuals":{},"aside":[],"sampled":false}'
)


@cache
def rows(count: int, first: int = 0, seed: int = 11) -> tuple[tuple[str, ...], ...]:
    """Return rows of run, sensors and air speed [m/s], h following the speed as its power 0.6."""
    described = rig.read_bytes(RIG.encode())
    found = []
    for number in range(first, first + count):
        rng = np.random.default_rng([seed, number])
        speed = rng.uniform(1.0, 10.0)
        readings, _ = draw(described, Truth(h=12 * speed**0.6), rng)
        temperatures = (f"{readings.values[name] - 273.15:.3f}" for name in SENSORS[:-1])
        found.append((f"run {number + 1}", *temperatures, f"{readings.values['Q']:.4f}", f"{speed:.2f}"))
    return tuple(found)


def text(body: Sequence[Sequence[str]]) -> str:
    """Return rows as the content of a CSV file."""
    header = ("run", *SENSORS, "speed [m/s]")
    return "".join(",".join(row) + "\n" for row in (header, *body))


def write(folder: Path, **tables: str) -> list[Path]:
    """Write the rig and tables by their names; return the paths as the command takes them."""
    folder.mkdir(exist_ok=True)
    (folder / "rig.toml").write_text(RIG, encoding="utf-8")
    for name, content in tables.items():
        (folder / f"{name}.csv").write_text(content, encoding="utf-8")
    return [folder / "rig.toml", *(folder / f"{name}.csv" for name in tables)]


class Here:
    """A pool that computes at once, in this process; it counts the runs that it was sent."""

    size = 1

    def __init__(self, function: Callable[[Block], Answer] | None = None) -> None:
        self.function = function
        self.computed = 0

    def submit(self, function: Callable[[Block], Answer], block: Block, /) -> "Future[Answer]":
        self.computed += len(block.runs)
        future: Future[Answer] = Future()
        try:
            future.set_result((self.function or function)(block))
        except Exception as error:  # noqa: BLE001  # as an executor does
            future.set_exception(error)
        return future

    def renew(self) -> None:
        pass

    def close(self) -> None:
        pass


def compute(
    paths: Sequence[Path], out: Path, pool: object = None, block: int | None = None, **options: object
) -> bytes:
    """Compute a campaign and return its results.csv."""
    out.mkdir(exist_ok=True)
    done = campaign.run(campaign.read(paths), out, pool=pool or Here(), block=block, **options)
    campaign_table.write(done)
    return (out / "results.csv").read_bytes()


def pretend(block: Block) -> Answer:
    """Answer a block at once, with nothing in it but that all is well."""
    return Answer(tuple(Record(key, NOTHING) for key, _, _ in block.runs), 0.001 * len(block.runs))


def deadly(block: Block) -> Answer:
    """Answer as `pretend` does, but die of the run that kills."""
    if any(name == KILLER for _, name, _ in block.runs):
        os.kill(os.getpid(), signal.SIGKILL)
    return pretend(block)


def dying_once(block: Block) -> Answer:
    """Answer as `pretend` does, but die the first time that anyone is asked."""
    marker = Path(os.environ["FINBACK_TEST_MARKER"])
    if not marker.exists():
        marker.touch()
        os.kill(os.getpid(), signal.SIGKILL)
    return pretend(block)


class Doomed(Processes):
    """Worker processes that answer by another function."""

    def __init__(self, size: int, function: Callable[[Block], Answer]) -> None:
        self.function = function
        super().__init__(size)

    def submit(self, _function: Callable[[Block], Answer], block: Block, /) -> "Future[Answer]":
        return super().submit(self.function, block)


__all__ = [
    "KILLER",
    "RIG",
    "SENSORS",
    "Doomed",
    "Here",
    "compute",
    "deadly",
    "dying_once",
    "failed",
    "pretend",
]
