"""Whole fits: published readings, and invented rigs whose truth is known.

The aluminium rod is R. C. Smith, Uncertainty Quantification (SIAM 2013), Example 7.16: 19.1 W/(m² K) and
-184,100 W/m², printed with errors at rounded estimates; at full precision its readings give those below.
Everything else here is invented: the truth is what the readings were computed from.
"""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from fits import DATASETS, dataset
from rigs import HOLES, ZERO, Truth, draw, exact_readings, pin_rig

import finback
from finback import derived, optimum, posing
from finback import readings as readings_file
from finback import rig as rig_file
from finback.candidates import enumerate_candidates
from finback.estimate import Estimate, Summary
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig, Sensor
from finback.sampling import Settings

STATED_K = Quantity(167.0, 8.35)
TRUTH = Truth()
NUMBERS = ("median", "mean", "sd", "low95", "high95", "least_squares", "standard_error")


def summary(estimate: Estimate, name: str) -> Summary:
    return {**estimate.parameters, **estimate.derived}[name]


def codes(estimate: Estimate) -> set[str]:
    return {finding.code for finding in estimate.findings}


def why_null(estimate: Estimate, name: str) -> str:
    """The sentence that says why a quantity is null."""
    of = [f for f in estimate.findings if f.code == "not-determined"]
    (found,) = [f.message for f in of if f.evidence["quantity"] == name]
    return found


def assert_near(estimate: Estimate, name: str, truth: float, sds: float = 3.0) -> None:
    """The truth lies within so many posterior standard deviations of the median, and is worth that many."""
    found = summary(estimate, name)
    assert found.median is not None
    assert found.sd is not None
    assert found.low95 is not None
    assert found.high95 is not None
    assert abs(found.median - truth) < sds * found.sd, name
    assert found.low95 < found.median < found.high95
    assert found.sd < 0.2 * max(abs(truth), 10.0 if found.unit == "degC" else 0.0), name


def assert_truth(estimate: Estimate, rig: Rig, truth: Truth, *names: str) -> None:
    """Every named quantity is near what is true of the rig."""
    solution = truth.solve(rig, np.zeros(1))
    area = np.pi / 4 * rig.geometry["diameter"].value ** 2
    true = {
        "h": truth.h,
        "k": truth.k,
        "joint": truth.joint or 0.0,
        "joint_times_k": (truth.joint or 0.0) * truth.k,
        "plate": truth.plate - ZERO,
        "air": truth.air - ZERO,
        "h_over_k": truth.h / truth.k,
        "m": float(np.sqrt(truth.h / truth.k * 4 / rig.geometry["diameter"].value)),
        "base_temperature": float(solution.base_temperature[0]) - ZERO,
        "heat": float(solution.base_heat[0]),
        "base_heat_flux": float(solution.base_heat[0]) / area,
        "tip_temperature": truth.tip_temperature - ZERO,
    }
    for name in names:
        assert_near(estimate, name, true[name])


def assert_not_determined(estimate: Estimate, *names: str) -> None:
    for name in names:
        found = summary(estimate, name)
        assert all(getattr(found, number) is None for number in NUMBERS), name


def fit_drawn(
    rig: Rig, truth: Truth = TRUTH, seed: int = 1, power: float | None = None
) -> tuple[Estimate, Truth]:
    readings, true = draw(rig, truth, np.random.default_rng(seed), power)
    return finback.fit(rig, readings, seed=1), true


# --- published readings ---


def test_aluminium_rod_by_least_squares() -> None:
    estimate = dataset("aluminium-rod")
    h, flux = estimate.parameters["h"], estimate.derived["base_heat_flux"]
    assert h.least_squares == pytest.approx(19.1422, rel=1e-3)
    assert h.standard_error == pytest.approx(0.1395, rel=1e-3)
    # into the rod, which the source counts as negative
    assert flux.least_squares == pytest.approx(184_140, rel=1e-3)
    assert flux.standard_error == pytest.approx(1_395, rel=1e-3)
    assert estimate.fit.noise == pytest.approx(0.24013, rel=1e-3)
    assert estimate.fit.degrees_of_freedom == 13


def test_aluminium_rod_correlation_of_coefficient_and_flux() -> None:
    folder = DATASETS / "aluminium-rod"
    rig = rig_file.read(str(folder / "rig.toml"))
    readings = readings_file.read(str(folder / "readings.csv"), rig).pick(None)
    (candidate,) = enumerate_candidates(rig, readings)
    point = optimum.fit(posing.pose(rig, readings, candidate))
    slopes = derived.gradients(point.problem, point.z)
    pair = np.stack([slopes["h"], slopes["base_heat_flux"]])
    covariance = pair @ point.point.covariance @ pair.T
    # -0.966 with the source's sign of the flux, which is negative into the rod
    assert covariance[0, 1] / np.sqrt(covariance[0, 0] * covariance[1, 1]) == pytest.approx(0.966, abs=1e-3)
    draws = dataset("aluminium-rod").draws
    columns = [draws.values[..., draws.names.index(name)].ravel() for name in ("h", "base_heat_flux")]
    assert np.corrcoef(columns)[0, 1] == pytest.approx(0.966, abs=0.005)


def test_aluminium_rod_posterior() -> None:
    estimate = dataset("aluminium-rod")
    for name, sd in (("h", 0.1395), ("base_heat_flux", 1_395.0)):
        found = summary(estimate, name)
        assert found.median == pytest.approx(found.least_squares, abs=0.15 * sd)
        # an unknown noise makes it a Student t with 13 degrees of freedom, sqrt(13/11) wider
        assert found.sd == pytest.approx(sd, rel=0.12)
        assert found.sd == pytest.approx(sd * np.sqrt(13 / 11), rel=0.05)
        assert found.determined_by == "readings"
    assert estimate.sampler.rhat_max <= 1.01
    assert estimate.sampler.ess_min >= 1000
    assert estimate.sampler.converged
    assert estimate.status == "ok"


def test_copper_pin_by_least_squares() -> None:
    # at base temperature, k and air as given the source's readings have their optimum at 13.475 W/(m² K)
    estimate = dataset("copper-pin")
    h = estimate.parameters["h"]
    assert h.least_squares == pytest.approx(13.475, abs=0.3 * h.standard_error)
    # the electrical power only bounds the heat from above
    assert summary(estimate, "heat").high95 < 8.52
    assert "heat-balance" not in codes(estimate)


# --- invented rigs ---


@pytest.mark.parametrize("name", ["bench-pin", "bench-pin-loose-joint"])
def test_invented_bench_pin_covers_its_truth(name: str) -> None:
    estimate = dataset(name)
    truth = {"h": 45.0, "k": 167.0, "joint": 5e-5 if name == "bench-pin" else 4e-4}
    truth |= {"plate": 80.0, "air": 22.0}
    truth |= {"base_temperature": 75.4, "heat": 4.62441} if name == "bench-pin" else {}
    for quantity, value in truth.items():
        found = summary(estimate, quantity)
        assert found.low95 <= value <= found.high95, quantity
        assert found.low95 <= found.least_squares <= found.high95, quantity
    assert sum(c.probability for c in estimate.candidates) == pytest.approx(1.0)
    assert sum(c.probability for c in estimate.candidates if ", joint" in c.name) > 0.999


def test_temperatures_along_the_fin_alone_give_only_the_ratio() -> None:
    rig = pin_rig(places=("air",))
    estimate, truth = fit_drawn(rig)
    assert_not_determined(estimate, "h", "k", "joint", "joint_times_k", "heat", "base_heat_flux")
    assert_truth(estimate, rig, truth, "h_over_k", "m", "base_temperature", "air")
    ratio = summary(estimate, "h_over_k")
    assert ratio.low95 <= 45 / 167 <= ratio.high95
    assert ratio.determined_by == "readings"
    assert summary(estimate, "efficiency").median == pytest.approx(0.628, abs=0.01)
    for name in ("h", "k"):
        said = why_null(estimate, name)
        assert "h/k" in said
        assert "conductivity" in said
        assert "heat" in said
    assert estimate.status == "caution"


def test_a_plate_without_heat_and_conductivity_gives_the_product_with_k() -> None:
    rig = pin_rig(places=("plate", "air"))
    estimate, truth = fit_drawn(rig)
    assert_not_determined(estimate, "h", "k", "joint", "heat", "base_heat_flux")
    assert_truth(estimate, rig, truth, "h_over_k", "joint_times_k", "base_temperature", "plate", "air")
    product = summary(estimate, "joint_times_k")
    assert product.low95 <= 5e-5 * 167 <= product.high95
    assert "R''·k = " in why_null(estimate, "joint")


@pytest.mark.parametrize("stated", ["conductivity", "heat"])
def test_a_stated_conductivity_or_the_heat_parts_what_the_temperatures_leave_together(stated: str) -> None:
    stating = {"conductivity": {"conductivity": STATED_K, "places": ("plate", "air")}, "heat": {}}
    rig = pin_rig(tip="convective", **stating[stated])
    estimate, truth = fit_drawn(rig, seed=2)
    assert_truth(estimate, rig, truth, "h", "k", "joint", "heat", "h_over_k")
    assert "not-determined" not in codes(estimate)
    k = summary(estimate, "k")
    assert k.determined_by == ("prior" if stated == "conductivity" else "readings")
    if stated == "conductivity":
        assert k.sd == pytest.approx(8.35, rel=0.05)


def test_an_adiabatic_tip_on_a_short_fin_is_recognised() -> None:
    holes = tuple(1e-3 * x for x in (2, 8, 14, 20, 26, 29))
    rig = pin_rig(
        length=0.03, holes=holes, noise=0.05, calibration=0.05, position_sd=1e-4, conductivity=STATED_K
    )
    truth = Truth(h=500.0, tip="adiabatic")
    estimate, true = fit_drawn(rig, truth)
    best = estimate.candidates[0]
    assert best.name == "adiabatic tip, joint"
    assert best.probability > 0.9
    assert estimate.comparison.startswith("The readings support the adiabatic tip, joint")
    assert_truth(estimate, rig, true, "h", "k", "joint", "heat")


def test_a_long_fin_does_not_tell_its_tip_and_the_estimate_says_so() -> None:
    holes = tuple(1e-3 * x for x in (5, 20, 50, 80, 110, 140, 200, 300, 400, 480))
    rig = pin_rig(length=0.5, holes=holes, conductivity=STATED_K)
    estimate, truth = fit_drawn(rig, Truth(h=60.0))
    assert np.sqrt(60 * 4 / (167 * 0.008)) * 0.5 > 6  # m L
    probability = {c.name: c.probability for c in estimate.candidates}
    adiabatic, convective = (probability[f"{tip} tip, joint"] for tip in ("adiabatic", "convective"))
    assert adiabatic / convective == pytest.approx(1.0, abs=0.1)
    assert sum(p for name, p in probability.items() if not name.startswith("fixed")) > 0.95
    assert "cannot tell" in estimate.comparison
    for tip in ("adiabatic tip, joint", "convective tip, joint"):
        assert tip in estimate.comparison
    assert_truth(estimate, rig, truth, "h", "k", "joint", "heat")


def test_a_held_tip_is_recognised_and_its_temperature_given() -> None:
    rig = pin_rig(places=("air", "heat"), conductivity=STATED_K)
    estimate, truth = fit_drawn(rig, Truth(tip="fixed", tip_temperature=ZERO + 35.0))
    assert estimate.candidates[0].name == "fixed tip"
    assert_truth(estimate, rig, truth, "h", "tip_temperature", "heat")
    estimate.to_dict()


def test_a_held_tip_beside_others_of_weight_still_has_a_temperature() -> None:
    # at the truth's own tip temperature a held tip explains the readings as well as a convective one
    rig = pin_rig(
        places=("air",), noise=1.0, tip_temperature=Quantity(ZERO + 46.0, 5.0), conductivity=STATED_K
    )
    estimate, _ = fit_drawn(rig, Truth(tip="fixed", tip_temperature=ZERO + 46.0), seed=3)
    estimate.to_dict()  # refuses what is not a number
    held = next(c for c in estimate.candidates if c.name.startswith("fixed"))
    assert 0.01 < held.probability < 0.99


@pytest.mark.parametrize(
    ("plate", "air"),
    [
        (5.0, -30.0),
        (-10.0, 30.0),
        pytest.param(-150.0, -196.0, marks=pytest.mark.slow),
        pytest.param(300.0, 20.0, marks=pytest.mark.slow),
    ],
    ids=str,
)
def test_heated_and_cooled_fins_in_cold_and_warm_air(plate: float, air: float) -> None:
    rig = pin_rig(conductivity=STATED_K, tip="convective")
    estimate, truth = fit_drawn(rig, Truth(plate=ZERO + plate, air=ZERO + air), seed=4)
    assert_truth(estimate, rig, truth, "h", "k", "joint", "plate", "air", "base_temperature", "heat")
    assert (summary(estimate, "heat").median > 0) == (plate > air)
    assert summary(estimate, "efficiency").median == pytest.approx(0.628, abs=0.03)


def test_sensors_may_be_listed_in_any_order() -> None:
    rig = pin_rig(places=("heat",), conductivity=STATED_K, tip="convective")
    truth = Truth(joint=None)
    readings, _ = draw(rig, truth, np.random.default_rng(1))
    turned = replace(rig, sensors=dict(reversed(rig.sensors.items())))
    fits = []
    for each in (rig, turned):
        (candidate,) = enumerate_candidates(each, readings)
        fits.append(optimum.fit(posing.pose(each, readings, candidate)))
    np.testing.assert_allclose(fits[0].z, fits[1].z, rtol=1e-6)
    assert fits[0].chi_square == pytest.approx(fits[1].chi_square, rel=1e-6)


def test_error_free_readings_give_the_truth_back() -> None:
    rig = pin_rig(conductivity=STATED_K, tip="convective")
    estimate = finback.fit(rig, exact_readings(rig), seed=1)
    truth = {"h": 45.0, "k": 167.0, "joint": 5e-5, "plate": 80.0, "air": 22.0}
    for name, value in truth.items():
        assert summary(estimate, name).least_squares == pytest.approx(value, rel=1e-6), name
    assert estimate.fit.chi_square < 1e-6
    assert max(abs(residual) for residual in estimate.fit.residuals.values()) < 1e-4


def test_error_free_readings_without_a_stated_noise() -> None:
    rig = pin_rig(noise=None, calibration=0.0, position_sd=0.0, conductivity=STATED_K, tip="convective")
    # a posterior as narrow as this takes long to sample; that it is found and said is the matter here
    estimate = finback.fit(rig, exact_readings(rig), seed=1, settings=Settings(max_steps=100))
    assert summary(estimate, "h_over_k").least_squares == pytest.approx(45 / 167, rel=1e-5)
    assert summary(estimate, "noise").median < 1e-3
    estimate.to_dict()


def test_three_thermocouples() -> None:
    rig = pin_rig(holes=(0.005, 0.05, 0.11), conductivity=STATED_K, tip="convective")
    estimate, truth = fit_drawn(rig)
    assert_truth(estimate, rig, truth, "h", "k", "joint", "heat", "h_over_k", "base_temperature")


@pytest.mark.parametrize("seed", [5, 17])  # readings above and below what no joint at all would give
def test_a_perfect_joint_gets_an_upper_limit_and_no_value(seed: int) -> None:
    rig = pin_rig(conductivity=STATED_K, tip="convective")
    estimate, truth = fit_drawn(rig, Truth(joint=0.0), seed)
    joint, product = summary(estimate, "joint"), summary(estimate, "joint_times_k")
    for found in (joint, product):
        assert found.median is None
        assert found.low95 == 0.0
    assert 0 < joint.high95 < 2e-5  # a temperature step of 1.5 K at 91 kW/m²
    assert product.high95 == pytest.approx(joint.high95 * truth.k, rel=0.2)
    assert "at most" in why_null(estimate, "joint")
    assert estimate.status == "ok"  # that a joint is good is no concern
    without = next(c for c in estimate.candidates if c.name.endswith("no joint"))
    assert without.probability > 0.5
    assert_truth(estimate, rig, truth, "h", "k", "heat")


def test_more_heat_than_the_heater_supplies_is_a_fault() -> None:
    rig = pin_rig(places=("plate", "air", "heater"), conductivity=STATED_K, tip="convective")
    estimate, _ = fit_drawn(rig, power=2.0)
    (fault,) = [f for f in estimate.findings if f.severity == "fault"]
    assert fault.code == "heat-balance"
    assert fault.sensor == "PH"
    assert estimate.findings[0] is fault
    assert estimate.status == "caution"


def test_an_insulated_bar_gets_an_upper_limit_of_its_coefficient() -> None:
    bare = pin_rig(conductivity=STATED_K, tip="adiabatic")
    heat = Sensor("Q", "heat", noise=0.05)  # W: as good as all that a coefficient of 0.5 W/(m² K) takes away
    rig = replace(bare, sensors={**bare.sensors, "Q": heat})
    estimate, _ = fit_drawn(rig, Truth(h=1e-4, joint=None, tip="adiabatic"))
    h = summary(estimate, "h")
    assert h.median is None
    assert h.low95 == 0.0
    assert 0 < h.high95 < 2.0
    assert "at most" in why_null(estimate, "h")
    assert summary(estimate, "base_temperature").median == pytest.approx(80.0, abs=0.5)


def test_a_heater_with_large_losses_bounds_nothing_away() -> None:
    rig = pin_rig(places=("plate", "air", "heater"), conductivity=STATED_K, tip="convective")
    estimate, truth = fit_drawn(rig, power=20.0)
    assert "heat-balance" not in codes(estimate)
    assert_truth(estimate, rig, truth, "h", "k", "joint", "heat")


def test_a_thick_fin_is_flagged() -> None:
    rig = pin_rig(
        length=0.03,
        diameter=0.02,
        holes=(0.002, 0.01, 0.02, 0.028),
        conductivity=Quantity(1.5, 0.05),
        tip="convective",
    )
    estimate, _ = fit_drawn(rig, Truth(k=1.5, h=100.0))
    assert "thick-fin" in codes(estimate)
    assert summary(estimate, "transverse_biot").median > 0.1
    assert "thick-fin" not in codes(dataset("bench-pin"))


def test_a_wrong_reading_is_set_aside_and_a_misfit_where_it_counts_as_read() -> None:
    rig = pin_rig(conductivity=STATED_K, tip="convective")
    readings, _ = draw(rig, TRUTH, np.random.default_rng(1))
    wrong = Readings("r", {**readings.values, "T4": readings.values["T4"] + 3.0})
    found = finback.fit(rig, wrong, seed=1)
    assert {"sensor-outlier"} == codes(found) - {"assumed", "position-shift"}
    assert [row.sensor for row in found.table if row.excluded] == ["T4"]
    assert "misfit" in codes(finback.fit(rig, wrong, seed=1, as_read=True))
    aside = Readings("r", wrong.values, excluded={"T4": "reads 3 K too high"})
    estimate = finback.fit(rig, aside, seed=1)
    assert "misfit" not in codes(estimate)
    (row,) = [row for row in estimate.table if row.excluded]
    assert row.sensor == "T4"
    assert row.residual == pytest.approx(3.0, abs=1.0)
    assert "T4" not in estimate.fit.residuals


def test_a_sampler_without_time_says_so_and_still_answers() -> None:
    rig = pin_rig(conductivity=STATED_K, tip="convective")
    estimate = finback.fit(rig, exact_readings(rig), seed=1, settings=Settings(block=10, max_steps=10))
    assert not estimate.sampler.converged
    assert "not-converged" in codes(estimate)
    assert estimate.status == "caution"
    estimate.to_dict()


@pytest.mark.slow
@pytest.mark.parametrize("noise", [0.15, None], ids=["stated noise", "estimated noise"])
def test_an_average_over_candidates_carries_their_spread(noise: float | None) -> None:
    rig = pin_rig(noise=noise, conductivity=STATED_K)
    together = finback.fit(rig, exact_readings(rig), seed=1)
    alone: dict[str, Summary] = {}
    for tip in ("adiabatic", "convective"):
        alone[tip] = finback.fit(
            pin_rig(noise=noise, conductivity=STATED_K, tip=tip), exact_readings(rig), seed=1
        ).derived["h_over_k"]
    weights = np.array(
        [next(c.probability for c in together.candidates if c.name == f"{tip} tip, joint") for tip in alone]
    )
    weights /= weights.sum()
    means = np.array([s.mean for s in alone.values()])
    spread = weights @ (np.array([s.sd for s in alone.values()]) ** 2 + (means - weights @ means) ** 2)
    found = together.derived["h_over_k"]
    assert found.mean == pytest.approx(weights @ means, abs=0.1 * found.sd)
    assert found.sd == pytest.approx(np.sqrt(spread), rel=0.1)


def test_progress_names_its_stages_and_never_goes_back() -> None:
    seen: list[tuple[str, float]] = []
    progress: Callable[[str, float], None] = lambda stage, done: seen.append((stage, done))  # noqa: E731
    rig = pin_rig(conductivity=STATED_K, tip="convective", holes=HOLES[:4])
    finback.fit(rig, exact_readings(rig), seed=1, progress=progress)
    fractions = [done for _, done in seen]
    assert fractions == sorted(fractions)
    assert 0 <= fractions[0] < fractions[-1] <= 1
    assert len({stage for stage, _ in seen}) >= 2
