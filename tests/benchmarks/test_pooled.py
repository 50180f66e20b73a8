"""A thousand runs that share k and joint, six candidates compared, beside the same runs one by one. Run with

pytest -m benchmark tests/benchmarks/test_pooled.py
"""

import sys
import time
from dataclasses import replace
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parents[1] / "inverse"))
sys.path.insert(0, str(Path(__file__).parents[1] / "quality"))

import pooled_study

from finback import pooled, quick

pytestmark = pytest.mark.benchmark

RUNS, FEW, BESIDE = 1000, 250, 20
TEXT = pooled_study.RIG.replace(
    'tip = "convective"\n', ""
)  # three tips are compared, with a joint and without


def seconds(pool):
    begin = time.perf_counter()
    pooled.estimate(pool, 1)
    return time.perf_counter() - begin


def test_a_thousand_runs_at_once(benchmark):
    pool, *_ = pooled_study.campaign(0, RUNS, TEXT)
    few = seconds(replace(pool, rows=pool.rows[:FEW]))
    ours = benchmark.pedantic(seconds, args=(pool,), rounds=1)
    begin = time.perf_counter()
    for row in pool.rows[:BESIDE]:
        quick.estimate(pool.rig, row.readings, 1)
    one_by_one = (time.perf_counter() - begin) / BESIDE * RUNS
    benchmark.extra_info |= {"s": ours, "s for a quarter": few, "s one by one": one_by_one}
    assert ours < one_by_one
    assert ours < 1.5 * RUNS / FEW * few  # linear in the runs
