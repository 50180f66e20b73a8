"""A campaign of a thousand runs, its candidates compared, beside a hand-written emcee loop. Run with

    pytest -m benchmark tests/benchmarks/test_batch.py

and `python tests/benchmarks/test_batch.py 100 1000 10000 100000` to see time and memory grow with the runs.
"""

import csv
import io
import multiprocessing
import sys
import tempfile
import threading
import time
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))
sys.path.insert(0, str(Path(__file__).parents[1] / "inverse"))

import batch_baseline
import campaigns

from finback import campaign, campaign_table

pytestmark = pytest.mark.benchmark

WORKERS = 2
RUNS, FEW, BESIDE = 1000, 100, 20
RIG = campaigns.RIG.replace('tip = "convective"\n', "")  # three tips are compared


def compute(folder, runs):
    """Compute a campaign of so many runs; return its seconds, and the content of results.csv."""
    paths = campaigns.write(folder, readings=campaigns.text(campaigns.rows(runs)))
    paths[0].write_text(RIG, encoding="utf-8")
    out = folder / "out"
    out.mkdir()
    begin = time.perf_counter()
    pool = campaign.processes(WORKERS)
    try:
        campaign_table.write(campaign.run(campaign.read(paths), out, pool=pool))
    finally:
        pool.close()
    return time.perf_counter() - begin, (out / "results.csv").read_text(encoding="utf-8")


def by_hand(rows):
    """Return how long the hand-written loop takes for these runs [s], and what it finds."""
    runs = [tuple(map(float, row[1:7])) for row in rows]
    begin = time.perf_counter()
    with multiprocessing.get_context("spawn").Pool(WORKERS) as pool:
        found = pool.map(batch_baseline.estimate, runs, chunksize=1)
    return time.perf_counter() - begin, found


def test_a_thousand_runs(benchmark, tmp_path):
    seconds, found = by_hand(campaigns.rows(BESIDE))
    ours, table = benchmark.pedantic(compute, args=(tmp_path / "many", RUNS), rounds=1)
    few, _ = compute(tmp_path / "few", FEW)
    a_run = (ours - few) / (RUNS - FEW)  # without what every campaign costs, however few its runs
    benchmark.extra_info |= {
        "ms a run": 1e3 * ours / RUNS,
        "ms a further run": 1e3 * a_run,
        "by hand, ms a run": 1e3 * seconds / BESIDE,
        "times the baseline": seconds / BESIDE / (ours / RUNS),
    }
    rows = list(csv.DictReader(io.StringIO(table, newline="")))
    for row, by_tip in zip(rows, found, strict=False):
        best = next(tip for tip in batch_baseline.TIPS if row["best_candidate"].startswith(tip))
        low, median, high = by_tip[best]
        assert float(row["h_median"]) == pytest.approx(median, abs=0.5 * (high - low))
    assert len(rows) == RUNS
    assert seconds / BESIDE > 50 * ours / RUNS


class Watched:
    """The largest memory of this process and those that it has started [MB], looked at ten times a second."""

    def __enter__(self):
        self.most = 0.0
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._look)
        self._thread.start()
        return self

    def __exit__(self, *_):
        self._ended.set()
        self._thread.join()

    def _look(self):
        import psutil

        own = psutil.Process()
        while not self._ended.wait(0.1):
            for process in (own, *own.children(recursive=True)):
                try:
                    self.most = max(self.most, process.memory_info().rss / 1e6)
                except psutil.Error:
                    continue


if __name__ == "__main__":
    print("   runs        s   ms a run   largest process, MB")  # noqa: T201
    for wanted in map(int, sys.argv[1:]):
        with tempfile.TemporaryDirectory() as place, Watched() as watched:
            taken, _ = compute(Path(place) / "campaign", wanted)
        print(f"{wanted:7} {taken:8.1f} {1e3 * taken / wanted:10.2f} {watched.most:10.0f}")  # noqa: T201
