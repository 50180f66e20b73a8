"""Speed of the forward model, as ratios to a boundary-value solver and to each other run beside it. Run with

pytest -m benchmark tests/benchmarks
"""

import time

import numpy as np
import pytest
from scipy.integrate import solve_bvp

from finback.models import (
    ConvectiveTip,
    Fin,
    Joint,
    Trapezoidal,
    UniformCoefficient,
    general,
    pin,
    solve,
)

pytestmark = pytest.mark.benchmark

SETS = 10_000
LENGTH = 0.05
X = LENGTH * np.linspace(0.05, 0.95, 8)
TAPERED = Trapezoidal(
    LENGTH, width=0.2, thickness=0.004, tip_thickness=0.0015
)  # edges exposed: no closed form


def block(profile, n):
    """Return n fins of m L from 0.3 to 9, joints and air temperatures."""
    rng = np.random.default_rng(1)
    k = rng.uniform(100.0, 300.0, n)
    mL, zero = rng.uniform(0.3, 9.0, n), np.zeros(1)
    h = (mL / LENGTH) ** 2 * k * profile.area(zero)[0] / profile.perimeter(zero)[0]
    joint = Joint(rng.uniform(350.0, 400.0, n), rng.uniform(1e-5, 1e-4, n))
    return Fin(profile, k, UniformCoefficient(h), ConvectiveTip()), joint, rng.uniform(290.0, 300.0, n)


def fastest(function, repeats):
    """Return the shortest of several times [s]: what the work costs when nobody else is working."""
    times = []
    for _ in range(repeats):
        begin = time.perf_counter()
        function()
        times.append(time.perf_counter() - begin)
    return min(times)


def by_boundary_values(fin, base, air, row):
    """Solve one set of a block with scipy's collocation solver, to 1e-6: temperatures at X and base heat."""
    k, h = fin.conductivity[row], fin.surface.coefficient[row]
    base_area, tip_area = fin.profile.area(np.array([0.0, LENGTH]))
    plate, bond = base.plate_temperature[row] - air[row], base.resistance[row] / base_area

    def slopes(x, y):
        return np.stack([-y[1] / (k * fin.profile.area(x)), -h * fin.profile.perimeter(x) * y[0]])

    def ends(ya, yb):
        return np.array([ya[0] + bond * ya[1] - plate, yb[1] - h * tip_area * yb[0]])

    mesh = np.linspace(0, LENGTH, 11)
    found = solve_bvp(slopes, ends, mesh, np.stack([plate * (1 - mesh / LENGTH), np.ones(11)]), tol=1e-6)
    assert found.success
    return air[row] + found.sol(X)[0], found.sol(0.0)[1]


def test_general_solution_beside_a_boundary_value_solver(benchmark):
    case = block(TAPERED, SETS)
    rows = range(0, SETS, SETS // 10)
    theirs = fastest(lambda: [by_boundary_values(*case, row) for row in rows], 3) / len(rows)
    found = benchmark(lambda: general.solve(*case, X, accuracy=2e-6))
    ours = benchmark.stats.stats.min / SETS
    benchmark.extra_info |= {"ns a set": 1e9 * ours, "times as fast": theirs / ours}
    for row in rows:
        temperatures, heat = by_boundary_values(*case, row)
        assert found.temperatures[row] == pytest.approx(temperatures, abs=3e-3)
        assert found.base_heat[row] == pytest.approx(heat, rel=1e-4)
    assert theirs > 1000 * ours


def test_a_tapered_fin_costs_no_more_than_a_pin(benchmark):
    plain, tapered = block(pin(LENGTH, 0.006), SETS), block(TAPERED, SETS)
    theirs = fastest(lambda: solve(*plain, X), 20)
    benchmark(lambda: solve(*tapered, X))
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"ns a set": 1e9 * ours / SETS, "a pin's ns": 1e9 * theirs / SETS}
    assert ours < 1.2 * theirs


def test_one_set(benchmark):
    plain, tapered = block(pin(LENGTH, 0.006), 1), block(TAPERED, 1)
    theirs = fastest(lambda: solve(*plain, X), 2000)
    benchmark(lambda: solve(*tapered, X))
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"us": 1e6 * ours, "a pin's us": 1e6 * theirs}
    assert ours < 2.0 * theirs


def test_modes_of_a_new_shape(benchmark):
    diameters = iter(np.linspace(0.0041, 0.0042, 100_000))

    def first_solution():
        shape = Trapezoidal(LENGTH, width=0.2, thickness=float(next(diameters)), tip_thickness=0.0015)
        return solve(*block(shape, 5), X)

    benchmark.pedantic(first_solution, rounds=20)
    one = fastest(lambda: by_boundary_values(*block(TAPERED, 1), 0), 5)
    benchmark.extra_info |= {
        "ms": 1e3 * benchmark.stats.stats.min,
        "one boundary-value solution, ms": 1e3 * one,
    }
    assert benchmark.stats.stats.min < 4 * one
