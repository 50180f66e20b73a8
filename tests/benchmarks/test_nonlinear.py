"""Speed of non-linear fins, as ratios to a boundary-value solver run beside them. Run with

pytest -m benchmark tests/benchmarks
"""

import time

import numpy as np
import pytest
from scipy.integrate import solve_bvp

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    ConvectiveTip,
    Fin,
    Joint,
    LinearConductivity,
    PowerCoefficient,
    Radiating,
    Trapezoidal,
    UniformCoefficient,
    VaryingCoefficient,
    pin,
    solve,
)
from finback.models.nonlinear import take

pytestmark = pytest.mark.benchmark

SETS = 4096
PIN = pin(length=0.08, diameter=0.006)
TAPERED = Trapezoidal(length=0.08, width=0.1, thickness=0.003, tip_thickness=0.001)
AIR = 295.0
RNG = np.random.default_rng(3)
K, HOT = RNG.uniform(100, 250, SETS), RNG.uniform(330, 400, SETS)
N, EMISSIVITY = RNG.uniform(0.2, 0.35, SETS), RNG.uniform(0.05, 0.95, SETS)
ML = np.exp(RNG.uniform(np.log(0.3), np.log(3.0), SETS))


def coefficient(profile):
    zero = np.zeros(1)
    return (ML / profile.length) ** 2 * K * float(profile.area(zero)[0] / profile.perimeter(zero)[0])


H, H_TAPERED = coefficient(PIN), coefficient(TAPERED)
JOINT, HELD = Joint(HOT, RNG.uniform(1e-5, 2e-4, SETS)), BaseTemperature(HOT)
CASES = {
    "radiating": (Fin(PIN, K, Radiating(UniformCoefficient(H), EMISSIVITY, 290.0), ConvectiveTip()), JOINT),
    "free convection": (Fin(PIN, K, PowerCoefficient(H, N, 60.0), ConvectiveTip()), JOINT),
    "by place": (Fin(PIN, K, VaryingCoefficient(H, N), ConvectiveTip()), JOINT),
    "all at once": (
        Fin(
            PIN,
            LinearConductivity(K, 300.0, 5e-4),
            Radiating(PowerCoefficient(H, N, 60.0), EMISSIVITY, 300.0),
            ConvectiveTip(),
        ),
        JOINT,
    ),
    "tapered": (
        Fin(TAPERED, K, Radiating(PowerCoefficient(H_TAPERED, N, 60.0), EMISSIVITY), AdiabaticTip()),
        HELD,
    ),
}


def by_boundary_values(fin, base, x):
    """Solve one set with scipy's collocation solver, to 1e-6: temperatures at x and base heat."""
    profile, length = fin.profile, fin.profile.length
    base_area, tip_area = profile.area(np.array([0.0, length]))
    k = fin.conductivity if isinstance(fin.conductivity, LinearConductivity) else None
    plate = (base.plate_temperature if isinstance(base, Joint) else base.temperature).item()
    bond = base.resistance.item() / base_area if isinstance(base, Joint) else 0.0
    face = tip_area if isinstance(fin.tip, ConvectiveTip) else 0.0

    def slopes(x, y):
        conductance = (fin.conductivity if k is None else k.at(y[0])) * profile.area(x)
        return np.stack(
            [-y[1] / conductance, -profile.perimeter(x) * fin.surface.flux(y[0], AIR, x / length)]
        )

    def ends(ya, yb):
        given_off = face * fin.surface.flux(np.array([yb[0]]), AIR, 1.0)[0]
        return np.array([ya[0] + bond * ya[1] - plate, yb[1] - given_off])

    mesh = np.linspace(0, length, 11)
    start = np.stack([np.linspace(plate, AIR, 11), np.ones(11)])
    found = solve_bvp(slopes, ends, mesh, start, tol=1e-6)
    assert found.success
    return found.sol(x)[0], found.sol(0.0)[1]


def of_row(value, row):
    return take(value, np.array([row]))


@pytest.mark.parametrize("name", CASES)
def test_a_block_beside_a_boundary_value_solver(benchmark, name):
    fin, base = CASES[name]
    x = fin.profile.length * np.linspace(0.05, 0.95, 8)
    rows = range(0, SETS, SETS // 8)
    begin = time.perf_counter()
    theirs = [by_boundary_values(of_row(fin, row), of_row(base, row), x) for row in rows]
    each = (time.perf_counter() - begin) / len(rows)
    found = benchmark(lambda: solve(fin, base, AIR, x))
    ours = benchmark.stats.stats.min / SETS
    benchmark.extra_info |= {"µs a set": 1e6 * ours, "times as fast": each / ours}
    assert np.all(found.converged)
    for row, (temperatures, heat) in zip(rows, theirs, strict=True):
        assert found.temperatures[row] == pytest.approx(temperatures, abs=1e-4)
        assert found.base_heat[row] == pytest.approx(heat, rel=1e-5)
    assert each > 200 * ours
