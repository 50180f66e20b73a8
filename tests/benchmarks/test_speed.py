"""Speed as ratios to a baseline run beside it, on the aluminium rod. Run with

    pytest -m benchmark tests/benchmarks

Absolute figures are for DEVELOPERS.md; what is asserted are ratios, since machines are shared and noisy.
"""

import subprocess
import sys
import time

import baseline
import numpy as np
import pytest

from finback import candidates, diagnostics, optimum, posing, proposal, readings, rig, routes, sampling
from finback.analysis import fit
from finback.datasets import path
from finback.models import solve
from finback.parameters import ZERO_CELSIUS

pytestmark = pytest.mark.benchmark

SETS = 64


@pytest.fixture(scope="module")
def problem():
    described = rig.read(path("aluminium-rod") / "rig.toml")
    run = readings.read(path("aluminium-rod") / "readings.csv", described).pick(None)
    (candidate,) = candidates.enumerate_candidates(described, run)
    return posing.pose(described, run, candidate)


def data(problem):
    n = len(problem.measured.positions)
    return problem.measured.positions, problem.measured.values[:n] - ZERO_CELSIUS


def fastest(function, repeats):
    """Return the shortest of several times [s]: what the work costs when nobody else is working."""
    times = []
    for _ in range(repeats):
        begin = time.perf_counter()
        function()
        times.append(time.perf_counter() - begin)
    return min(times)


def test_point_fit(benchmark, problem):
    theirs = fastest(lambda: baseline.point_fit(*data(problem)), 20)
    found = benchmark(optimum.fit, problem)
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"ms": 1e3 * ours, "times the baseline": theirs / ours}
    assert np.exp(found.z[0]) == pytest.approx(19.1422, rel=1e-4)
    assert ours < 1.5 * theirs  # it brings covariance, noise and rank as well


def test_forward_evaluation(benchmark, problem):
    z = np.tile(optimum.fit(problem).z, (SETS, 1))
    x, _ = data(problem)
    theirs = fastest(lambda: baseline.temperatures(19.1, 150.0, x), 200)
    benchmark(problem.predict, z)
    ours = benchmark.stats.stats.min / SETS
    benchmark.extra_info |= {"µs a set": 1e6 * ours, "times the baseline": theirs / ours}
    assert ours < theirs / 5


def test_sampling(benchmark, problem):
    diagnostics.ensemble_rhat(np.random.default_rng(0).normal(size=(4, 100, 2, 1)))  # loads arviz
    point = optimum.fit(problem)
    start = proposal.from_mode(routes.find_mode(point))
    seed = np.random.SeedSequence(1)

    def draw():
        fitted = proposal.adapt(problem.log_density, start, np.random.RandomState(1))
        return sampling.sample(
            problem.log_density, *fitted, seed, sampling.Settings(), lambda _fraction: None
        )

    chain = benchmark.pedantic(draw, rounds=3)
    ours = chain.ess_min / benchmark.stats.stats.min
    begin = time.perf_counter()
    theirs = baseline.sample(*data(problem)) / (time.perf_counter() - begin)
    benchmark.extra_info |= {"effective draws a second": ours, "times the baseline": ours / theirs}
    assert chain.converged
    assert ours >= 10 * theirs


def whole_posterior(problem, seed):
    """Return means, sds, 95 % limits and evidence of everything that a problem's parameters tell."""
    route = routes.weigh(problem, np.random.SeedSequence(seed))
    z = route.fast.z
    limits = route.fast.quantiles(z, (0.025, 0.975))
    return route.fast.mean(z), route.fast.sd(z), limits, route.fast.evidence, route.fast.khat


def test_whole_posterior(benchmark, problem):
    theirs = fastest(lambda: baseline.whole_posterior(*data(problem)), 2)
    mean, sd, _, evidence, khat = benchmark(whole_posterior, problem, 1)
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"ms": 1e3 * ours, "times the baseline": theirs / ours, "k-hat": khat}
    logs = [whole_posterior(problem, seed)[3].log for seed in range(40)]
    benchmark.extra_info["scatter of the log evidence"] = float(np.std(logs))
    their_mean, their_sd = baseline.whole_posterior(*data(problem))
    at = [problem.names.index(name) for name in ("h", "noise")]
    assert np.all(np.abs(mean[at] - their_mean[[0, 2]]) < 0.1 * their_sd[[0, 2]])
    assert sd[at] == pytest.approx(their_sd[[0, 2]], rel=0.1)
    assert np.std(logs) < 0.005
    assert evidence.error < 0.02
    assert theirs > 20 * ours


def test_two_hundred_posteriors(benchmark):
    described = rig.read(path("bench-pin") / "rig.toml")
    run = readings.read(path("bench-pin") / "readings.csv", described).pick(None)
    chosen = next(c for c in candidates.enumerate_candidates(described, run) if c.tip == "convective")
    random = np.random.default_rng(1)
    runs = []
    for _ in range(200):
        noise = random.normal(0.0, 0.1, len(run.values))
        values = dict(zip(run.values, np.add(list(run.values.values()), noise).tolist(), strict=True))
        runs.append(readings.Readings("drawn", values))

    def all_of_them():
        return [whole_posterior(posing.pose(described, each, chosen), 1) for each in runs]

    found = benchmark.pedantic(all_of_them, rounds=3)
    benchmark.extra_info["s"] = benchmark.stats.stats.min
    assert max(khat for *_, khat in found) < 0.7


def run_finback(*arguments):
    subprocess.run([sys.executable, "-m", "finback", *arguments], check=True, capture_output=True)


def test_help(benchmark):
    theirs = fastest(lambda: subprocess.run([sys.executable, "-c", "import typer.main"], check=True), 5)
    benchmark.pedantic(run_finback, args=("--help",), rounds=5)
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"s": ours, "times importing typer alone": ours / theirs}
    assert ours < 2.5 * theirs


def test_cold_fit_with_report(benchmark, tmp_path):
    imports = "import emcee, arviz, matplotlib.figure, pandas, scipy.stats"
    theirs = fastest(lambda: subprocess.run([sys.executable, "-W", "ignore", "-c", imports], check=True), 3)
    where = path("bench-pin")
    arguments = (
        "fit",
        str(where / "rig.toml"),
        str(where / "readings.csv"),
        "--out",
        str(tmp_path / "out"),
        "--force",
    )
    benchmark.pedantic(run_finback, args=arguments, rounds=3)
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"s": ours, "times importing the libraries alone": ours / theirs}
    assert ours < 4 * theirs


def test_a_tapered_fin_is_fitted_as_quickly_as_a_pin(benchmark):
    # an invented fin of each kind, sensors at the same shares of its length; tips and joint are compared
    pin = {"profile": "pin", "length": "90 mm", "diameter": "8 mm"}
    tapered = {"profile": "trapezoidal", "length": "90 mm", "width": "80 mm", "thickness": "4 mm",
               "tip_thickness": "1.5 mm", "edges": "exposed"}  # fmt: skip
    theirs = fastest(invented(pin), 5)
    benchmark.pedantic(invented(tapered), rounds=5, warmup_rounds=1)
    ours = benchmark.stats.stats.min
    benchmark.extra_info |= {"s": ours, "times the pin": ours / theirs}
    assert ours < 1.5 * theirs


def invented(fin):
    """Return the whole fit of an invented fin, to call."""
    sensors = {f"T{i}": {"at": f"{x} mm"} for i, x in enumerate((5, 20, 35, 50, 65, 80), start=1)}
    sensors |= {"TP": {"on": "plate"}, "TA": {"on": "air"}, "Q": {"on": "heat", "noise": "3 %"}}
    sensors["defaults"] = {"noise": "0.1 K", "calibration": "0.1 K", "position": "0.3 mm"}
    document = {"fin": fin, "material": {"conductivity": "167 W/(m K) +/- 5 %"}, "sensors": sensors}
    described = rig.Rig.from_dict(document)
    truth = {"h": 45.0, "k": 167.0, "joint": 5e-5, "plate": 353.0, "air": 295.0}
    x = np.array([sensor.position for sensor in described.fin_sensors()])
    solution = solve(*described.build(truth, "convective"), x)
    noise = np.random.default_rng(5).normal(0.0, 0.1, len(x))
    values = {f"T{i}": float(t) for i, t in enumerate(solution.temperatures[0] + noise, start=1)}
    values |= {"TP": 353.0, "TA": 295.0, "Q": float(solution.base_heat[0])}
    run = readings.Readings("drawn", values)
    return lambda: fit(described, run)
