"""Estimates for the report: an invented pin with plate, air and heat sensors, a bare rod, and one real fit.

But for `fit_bench` nothing here is measured or fitted. The "posterior" is a lognormal cloud around an
invented truth, and the readings are what the forward model gives there plus fixed errors.
"""

from dataclasses import replace

import numpy as np
import pytest

from finback import analysis, datasets
from finback.estimate import (
    BudgetLine,
    CandidateScore,
    Draws,
    Estimate,
    Expanded,
    FitQuality,
    Improvement,
    ProfileBand,
    Provenance,
    ReadingFit,
    SamplerRecord,
    Sensitivity,
    Summary,
)
from finback.findings import Finding
from finback.models.ends import BaseTemperature, ConvectiveTip, Joint
from finback.models.fin import Fin
from finback.models.profiles import pin, rectangular
from finback.models.solve import solve
from finback.models.surface import UniformCoefficient
from finback.quantity import Quantity
from finback.readings import Readings
from finback.report import figures, html
from finback.rig import Rig, Sensor

ZERO = 273.15
ERRORS = (0.12, -0.21, 0.05, 0.17, -0.09, -0.15, 0.22, -0.04, 0.11, -0.18, 0.02, 0.13, -0.07, -0.12, 0.19)
PROVENANCE = Provenance(
    "0.1.0",
    {"python": "3.11.7", "numpy": "2.0.0", "scipy": "1.13.0", "emcee": "3.1.6"},
    {"rig.toml": "9f" * 32, "readings.csv": "3c" * 32},
)


BUDGET = (  # invented
    BudgetLine(
        "calibration of the fin sensors", "systematic", {"h": 0.55, "k": 0.10, "h_over_k": 0.62, "heat": 0.0}
    ),
    BudgetLine("noise of the heat reading", "random", {"h": 0.25, "k": 0.35, "h_over_k": 0.004, "heat": 0.9}),
    BudgetLine("conductivity k, as stated", "prior", {"h": 0.12, "k": 0.52, "h_over_k": 0.02, "heat": 0.06}),
    BudgetLine(
        "noise of the fin sensors", "random", {"h": 0.075, "k": 0.025, "h_over_k": 0.35, "heat": 0.04}
    ),
    BudgetLine("wide defaults", "prior", {"h": 0.005, "k": 0.005, "h_over_k": 0.006, "heat": 0.0}),
)


def summarise(name, label, unit, draws, determined_by="readings", least_squares=None, standard_error=None):
    low, median, high = np.quantile(draws, [0.025, 0.5, 0.975])
    numbers = (float(each) for each in (median, draws.mean(), draws.std(ddof=1), low, high))
    return Summary(name, label, unit, *numbers, least_squares, standard_error, determined_by)


def nothing(name, label, unit):
    return Summary(name, label, unit, None, None, None, None, None, None, None, "prior")


def lognormal(rng, median, relative, n):
    return median * np.exp(relative * rng.standard_normal(n))


def make_table(sensors, predicted, skip=()):
    table, values = [], {}
    for sensor, value, error in zip(sensors, predicted, ERRORS * 4, strict=False):
        scale = 10.0 if sensor.name in skip else 1.0
        if sensor.place == "heat":
            error = 0.01 * error * value
        values[sensor.name] = value + scale * error
        table.append(
            ReadingFit(
                sensor.name, sensor.place, sensor.position, sensor.position_sd, value + scale * error, value,
                scale * error, 0.03 * value if sensor.place == "heat" else 0.36,
                "judged faulty by the operator" if sensor.name in skip else None,
            )
        )  # fmt: skip
    return tuple(table), values


def make_draws(names, units, values, prior, table):
    counted = tuple(row.sensor for row in table if row.excluded is None)
    pointwise = np.full((*values.shape[:2], len(counted)), -1.0)
    return Draws(names, units, values, prior, np.zeros(values.shape[:2], dtype=int), pointwise, counted)


def make_pin(names=None, title="Invented pin, bench 2"):
    rng = np.random.default_rng(20240229)
    n_chains, n_draws = 4, 1000
    n = n_chains * n_draws
    z = rng.standard_normal(n)
    h = 42.0 * np.exp(0.02 * z + 0.012 * rng.standard_normal(n))
    k = 166.0 * np.exp(0.025 * z + 0.015 * rng.standard_normal(n))
    joint = 5.1e-5 * np.exp(0.16 * rng.standard_normal(n) - 0.02 * z)
    plate = ZERO + 80.0 + 0.15 * rng.standard_normal(n)
    air = ZERO + 21.4 + 0.2 * rng.standard_normal(n)

    profile = pin(0.120, 0.008)
    fin = Fin(profile, k, UniformCoefficient(h), ConvectiveTip())
    x = np.linspace(0.0, 0.120, 121)
    solution = solve(fin, Joint(plate, joint), air, x)
    low, median, high = np.quantile(solution.temperatures, [0.025, 0.5, 0.975], axis=0)

    holes = (0.005, 0.012, 0.022, 0.036, 0.052, 0.072, 0.094, 0.114)
    names = names or (*(f"T{i + 1}" for i in range(len(holes))), "TP", "TA", "Q")
    sensors = [
        Sensor(name, "fin", at, 0.0005, 0.2, None, 0.3) for name, at in zip(names, holes, strict=False)
    ] + [
        Sensor(names[-3], "plate", noise=0.2, calibration=0.3),
        Sensor(names[-2], "air", noise=0.2, calibration=0.3),
        Sensor(names[-1], "heat", noise_relative=0.03),
    ]
    predicted = [
        *np.interp(holes, x, median),
        np.median(plate),
        np.median(air),
        np.median(solution.base_heat),
    ]
    table, values = make_table(sensors, predicted, skip=(names[5],))

    assumed = Finding("assumed", "note", "The tip was left out of the rig: candidates were compared.")
    findings = (
        Finding("sensor-outlier", "caution", f"{names[5]} lies 1.5 K below what the others say.", names[5]),
        assumed,
        Finding("assumed", "note", "No emissivity was given: h holds convection and radiation together."),
    )
    rig = Rig(
        title,
        "pin",
        {"length": Quantity(0.120, 0.0, "120 mm"), "diameter": Quantity(0.008, 2e-5, "8 mm +/- 0.02 mm")},
        {sensor.name: sensor for sensor in sensors},
        conductivity=Quantity(167.0, 8.35, "167 W/(m K) +/- 5 %"),
        assumed=findings[1:],
    )

    t_b = solution.base_temperature - ZERO
    quantities = {
        "h": ("W/(m^2 K)", h), "k": ("W/(m K)", k), "joint": ("m^2 K/W", joint), "air": ("degC", air - ZERO),
        "base_temperature": ("degC", t_b), "heat": ("W", solution.base_heat), "h_over_k": ("1/m", h / k),
    }  # fmt: skip
    none = np.full(2000, np.nan)
    priors = (
        lognormal(rng, 50.0, 1.5, 2000), lognormal(rng, 167.0, 0.05, 2000), lognormal(rng, 1e-4, 1.5, 2000),
        21.4 + 0.4 * rng.standard_normal(2000), none, none, none,
    )  # fmt: skip
    columns = [values.reshape(n_chains, n_draws).copy() for _, values in quantities.values()]
    columns[2][:, ::50] = np.nan  # draws of a candidate without a joint
    units = tuple(unit for unit, _ in quantities.values())
    draws = make_draws(tuple(quantities), units, np.stack(columns, axis=2), np.column_stack(priors), table)
    return Estimate(
        rig=rig,
        readings=Readings("hot-3", values, {names[5]: "judged faulty by the operator"}),
        status="caution",
        parameters={
            "h": summarise("h", "convection coefficient h", "W/(m^2 K)", h, "readings", 42.2, 1.1),
            "k": summarise("k", "conductivity k", "W/(m K)", k, "both", 163.9, 5.6),
            "joint": summarise("joint", "joint resistance R''", "m^2 K/W", joint, "readings", 5.2e-5, 0.8e-5),
            "air": summarise("air", "air temperature", "degC", air - ZERO, "both", 21.42, 0.24),
        },
        derived={
            "h_over_k": summarise("h_over_k", "ratio h/k", "1/m", h / k),
            "m": summarise("m", "fin parameter m", "1/m", np.sqrt(4 * h / (k * 0.008))),
            "base_temperature": summarise("base_temperature", "base temperature", "degC", t_b),
            "heat": summarise("heat", "heat into the fin", "W", solution.base_heat),
            "efficiency": summarise("efficiency", "fin efficiency", "1", rng.normal(0.712, 0.004, n)),
        },
        candidates=(
            CandidateScore("convective tip, joint", 0.931, -9.41, 0.02, -6.2, 31.1, 25.4),
            CandidateScore("adiabatic tip, joint", 0.062, -12.12, 0.02, -8.9, 36.4, 30.7),
            CandidateScore("convective tip, no joint", 0.007, -14.3, 0.03, -11.0, 41.9, 37.2),
            CandidateScore("infinite tip, joint", 2e-9, -29.4, 0.03, None, None, None),
        ),
        comparison="The readings favour a convective tip with a joint (probability 0.93).",
        compared="Surface law: uniform h alone; the rig leaves the tip open.",
        fit=FitQuality({r.sensor: r.residual for r in table if not r.excluded}, 6.3, 6, 0.39, None),
        table=table,
        band=ProfileBand(x, median, low, high),
        draws=draws,
        sampler=SamplerRecord("emcee, 4 ensembles", n, 2412.0, 1.004, 1, True),
        findings=findings,
        priors=(
            "h: log-normal around 50 W/(m² K), factor 4.5",
            "k: 167 W/(m K) ± 5 %, as the rig states",
            "joint: log-normal around 1e-4 m² K/W, factor 4.5",
        ),
        provenance=PROVENANCE,
        budget=BUDGET,
        expanded={
            "h": Expanded(42.0, 1.9, True),
            "k": Expanded(166.0, 9.6, True),
            "joint": Expanded(5.1e-5, 1.1e-5, False),
            "h_over_k": Expanded(0.2531, 0.0054, True),
        },
        improvement=Improvement(
            "h", "calibration of the fin sensors", "the fin sensors calibrated to 0.1 K", 0.7
        ),
        sensitivity=Sensitivity(
            "joint",
            3.0,
            {
                "convective tip, joint": 0.923,
                "adiabatic tip, joint": 0.061,
                "convective tip, no joint": 0.016,
                "infinite tip, joint": 2e-9,
            },
        ),
    )


def make_rod(n_sensors=15):
    """Return a long square bar without plate sensor, heat sensor or conductivity: only h/k is determined."""
    rng = np.random.default_rng(7)
    n = 2000
    h = lognormal(rng, 19.0, 0.007, n)
    base = ZERO + 180.0 + rng.standard_normal(n)
    air = np.full(n, ZERO + 21.3)
    x = np.linspace(0.0, 0.7, 141)
    fin = Fin(rectangular(0.7, 0.0095, 0.0095), 237.0, UniformCoefficient(h), ConvectiveTip())
    solution = solve(fin, BaseTemperature(base), air, x)
    low, median, high = np.quantile(solution.temperatures, [0.025, 0.5, 0.975], axis=0)
    holes = np.linspace(0.10, 0.66, n_sensors)
    sensors = [Sensor(f"x{round(1000 * at)}", "fin", float(at)) for at in holes]
    table, values = make_table(sensors, np.interp(holes, x, median))
    reason = "The readings along the fin determine h/k only: state the conductivity or measure the heat."
    lengths = {"length": Quantity(0.7), "width": Quantity(0.0095), "thickness": Quantity(0.0095)}
    ratio = h / 237.0
    values_of_draws = np.stack([ratio, base - ZERO], axis=1).reshape(4, n // 4, 2)
    prior = np.column_stack([lognormal(rng, 0.1, 2.0, 1000), rng.uniform(0.0, 400.0, 1000)])
    draws = make_draws(("h_over_k", "base_temperature"), ("1/m", "degC"), values_of_draws, prior, table)
    return Estimate(
        rig=Rig("Invented long bar", "rectangular", lengths, {s.name: s for s in sensors}, tip="convective"),
        readings=Readings("A", values),
        status="caution",
        parameters={
            "h": nothing("h", "convection coefficient h", "W/(m^2 K)"),
            "k": nothing("k", "conductivity k", "W/(m K)"),
        },
        derived={
            "h_over_k": summarise("h_over_k", "ratio h/k", "1/m", ratio, "readings", 0.0803, 0.0006),
            "base_temperature": summarise("base_temperature", "base temperature", "degC", base - ZERO),
            "heat": replace(nothing("heat", "heat into the fin", "W"), low95=0.0, high95=23.4),
        },
        candidates=(CandidateScore("convective tip", 1.0, -3.2, 0.01, -2.0, 8.1, 7.3),),
        comparison="One candidate was looked at: convective tip.",
        compared="Surface law: uniform h alone; the tip is as stated.",
        fit=FitQuality({r.sensor: r.residual for r in table}, 12.9, 13, None, 0.24),
        table=table,
        band=ProfileBand(x, median, low, high),
        draws=draws,
        sampler=SamplerRecord("emcee, 4 ensembles", n, 1210.0, 1.002, 1, True),
        findings=(
            Finding("not-determined", "caution", reason, None, {"quantity": "h"}),
            Finding("not-determined", "caution", reason, None, {"quantity": "k"}),
        ),
        priors=("h/k: log-normal around 0.1 1/m, factor 7.4",),
        provenance=PROVENANCE,
    )


HOSTILE = "<script>alert(1)</script>"
HOSTILE_NAMES = (
    'T"1"', "T'2'", "T<3>", "T&4", "$T_5$", "[bold]T6[/bold]", r"T\7", "{{ 7*7 }}", "[red]TP", "T--><b>A",
    "\x1b[31m$Q",
)  # fmt: skip


@pytest.fixture(scope="session")
def crowded_estimate():
    return make_rod(40)


def fit_bench():
    """Return the estimate of a bundled rig, by the whole package: what a user's report is made of."""
    folder = datasets.path("bench-pin")
    return analysis.fit(folder / "rig.toml", folder / "readings.csv", seed=1)


ESTIMATES = {
    "pin": make_pin,
    "rod": make_rod,
    "hostile": lambda: make_pin(HOSTILE_NAMES, HOSTILE),
    "bench": fit_bench,
}


@pytest.fixture(scope="session")
def estimates():
    return {name: make() for name, make in ESTIMATES.items()}


@pytest.fixture(scope="session")
def pin_estimate(estimates):
    return estimates["pin"]


@pytest.fixture(scope="session")
def rod_estimate(estimates):
    return estimates["rod"]


@pytest.fixture(scope="session")
def hostile_estimate(estimates):
    return estimates["hostile"]


@pytest.fixture(scope="session")
def pictures(estimates):
    return {name: figures.draw(estimate) for name, estimate in estimates.items()}


@pytest.fixture(scope="session")
def pages(estimates, pictures):
    return {name: html.render(estimate, pictures[name]) for name, estimate in estimates.items()}
