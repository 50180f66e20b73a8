"""Surface laws, radiation, k(T) and the plate: from rig.toml to an estimate.

Rigs and readings are invented: the readings are computed from a known truth by `finback.models` alone.
"""

from typing import Any

import numpy as np
import pytest
from rigs import REFERENCE, T0, ZERO, Truth, draw, exact_readings

import finback
from finback import optimum, posing
from finback.candidates import compared_laws, enumerate_candidates, why_compared
from finback.errors import InputError
from finback.estimate import Estimate
from finback.models import (
    LinearConductivity,
    PowerCoefficient,
    Radiating,
    UniformCoefficient,
    VaryingCoefficient,
    plate_heat,
)
from finback.models.materials import find
from finback.rig import Rig
from finback.sampling import Settings

SHORT = Settings(ess=400.0, autocorrelation_times=20.0, rhat=1.05, walkers=64)
"""A fit of few draws, for numbers that are compared with a truth two or three standard deviations wide."""

HOLES = (5, 15, 25, 40, 55, 70, 85, 98)  # mm
HOT = {"plate": ZERO + 120.0, "air": ZERO + 22.0, "k": 167.0}


def rig(places: tuple[str, ...] = ("plate", "air", "heat"), **tables: dict[str, Any]) -> Rig:
    names = {"plate": "TP", "air": "TA", "heat": "Q", "heater": "P"}
    sensors: dict[str, Any] = {f"T{n}": {"at": f"{x} mm"} for n, x in enumerate(HOLES, start=1)}
    sensors |= {names[place]: {"on": place} for place in places}
    for name in {"Q", "P"} & set(sensors):
        sensors[name] |= {"noise": "2 %", "calibration": "0 %"}
    sensors["defaults"] = {"noise": "0.05 K", "calibration": "0 K", "position": "0 mm"}
    document = {
        "title": "An invented pin",
        "fin": {"profile": "pin", "length": "100 mm", "diameter": "6 mm", "tip": "convective"},
        "material": {"conductivity": "167 W/(m K) +/- 2 %"},
        "sensors": sensors,
    }
    for name, table in tables.items():
        document[name] = document.get(name, {}) | table
    return Rig.from_dict(document)


def fit(found: Rig, truth: Truth, seed: int = 1) -> tuple[Estimate, Truth]:
    readings, true = draw(found, truth, np.random.default_rng(seed))
    return finback.fit(found, readings, seed=seed, settings=SHORT), true


def assert_near(estimate: Estimate, name: str, value: float) -> None:
    summary = {**estimate.parameters, **estimate.derived}[name]
    assert summary.median is not None, name
    assert summary.sd is not None
    assert abs(summary.median - value) < 3 * summary.sd + 1e-12, name


# which laws are compared


@pytest.mark.parametrize(
    ("tables", "laws"),
    [
        ({}, ("uniform",)),
        ({"air": {"speed": "2 m/s"}}, ("uniform",)),
        ({"air": {"speed": "0 m/s"}}, ("uniform", "free-convection")),
        ({"fin": {"orientation": "horizontal"}}, ("uniform", "free-convection")),
        ({"candidates": {"exponent": 0.25}}, ("uniform", "free-convection")),
        ({"candidates": {"surface_laws": ["varying", "radiating"]}}, ("varying", "radiating")),
    ],
)
def test_laws_are_those_listed_or_those_of_the_air(tables: dict[str, Any], laws: tuple[str, ...]) -> None:
    found = rig(**tables)
    assert compared_laws(found) == laws
    names = [candidate.name for candidate in enumerate_candidates(found)]
    assert len(names) == len(set(names)) == 2 * len(laws)  # with and without a joint
    assert all(("free convection" in name) <= ("free-convection" in laws) for name in names)


def test_a_law_that_is_alone_and_uniform_is_not_named() -> None:
    assert [c.name for c in enumerate_candidates(rig())] == [
        "convective tip, joint",
        "convective tip, no joint",
    ]


def test_tips_may_be_listed() -> None:
    found = rig(("air",), fin={"tip": None} | {}, candidates={"tips": ["adiabatic", "infinite"]})
    assert [c.tip for c in enumerate_candidates(found)] == ["adiabatic", "infinite"]
    assert why_compared(found).endswith("tips as the rig lists them.")


def test_a_listed_tip_must_fit_the_profile() -> None:
    shape = {"profile": "cone", "tip": None}
    with pytest.raises(InputError) as caught:
        rig(fin=shape, candidates={"tips": ["infinite"]})
    assert str(caught.value) == (
        "[candidates] tips: a cone cannot go on for ever as it ends; write "
        '"adiabatic", "convective" or "fixed", or leave tips out.'
    )


def test_a_tip_is_stated_or_compared() -> None:
    with pytest.raises(InputError) as caught:
        rig(candidates={"tips": ["adiabatic"]})
    assert (
        str(caught.value)
        == "[candidates] tips: the tip is stated in [fin] already; leave one of the two out."
    )


def test_radiation_is_a_law_or_stated_not_both() -> None:
    with pytest.raises(InputError) as caught:
        rig(material={"emissivity": 0.9}, candidates={"surface_laws": ["radiating"]})
    assert (
        str(caught.value) == "[candidates] surface_laws: with a stated emissivity every law radiates; "
        'leave "radiating" out.'
    )


@pytest.mark.parametrize(
    ("tables", "sentence"),
    [
        ({}, "Surface law: uniform h alone, since the rig does not say that the air is still; the tip is as "
             "stated."),
        ({"air": {"speed": "0 m/s"}, "material": {"emissivity": "0.9 +/- 0.05"}},
         "Surface laws: uniform h and free convection, since the rig says that the air is still; each "
         "radiates with the stated emissivity; the tip is as stated."),
        ({"candidates": {"surface_laws": ["uniform", "varying"]}},
         "Surface laws as the rig lists them: uniform h and h varying along the fin; the tip is as stated."),
    ],
)  # fmt: skip
def test_what_was_compared_is_said_with_its_reason(tables: dict[str, Any], sentence: str) -> None:
    assert why_compared(rig(**tables)) == sentence


# names become physics


BASE = {"h": 8.0, "k": 167.0, "air": 295.0, "base_temperature": 380.0}


def surface(**more: float) -> object:
    return rig(("air",)).build(BASE | more, "convective")[0].surface


def test_a_law_is_built_from_the_names_of_its_values() -> None:
    uniform = UniformCoefficient(8.0)
    assert surface() == uniform
    assert surface(exponent=0.3, reference_excess=40.0) == PowerCoefficient(8.0, 0.3, 40.0)
    assert surface(rise=-0.2) == VaryingCoefficient(8.0, -0.2)
    assert surface(emissivity=0.9) == Radiating(uniform, 0.9, None)
    assert surface(emissivity=0.9, surroundings=290.0, rise=0.1) == Radiating(
        VaryingCoefficient(8.0, 0.1), 0.9, 290.0
    )


def test_a_sampler_may_ask_for_a_temperature_that_is_none() -> None:
    found = rig(("air",), material={"emissivity": 0.9})
    fin, base, air = found.build(
        BASE | {"emissivity": 0.9, "base_temperature": np.array([-50.0, 380.0])}, "convective"
    )
    solution = finback.models.solve(fin, base, air, np.array([0.05]))
    assert np.isfinite(solution.temperatures).all()


def test_a_stated_conductivity_may_follow_the_temperature() -> None:
    found = rig(material={"temperature_coefficient": "-4e-4 1/K", "reference_temperature": "50 degC"})
    law = found.build(BASE | {"plate": 380.0}, "convective")[0].conductivity
    assert isinstance(law, LinearConductivity)
    t = np.linspace(250.0, 500.0, 6)
    assert law.at(t) == pytest.approx(167.0 * (1 - 4e-4 * (t - ZERO - 50.0)), rel=1e-12)


def test_a_handbook_conductivity_follows_the_temperature_where_it_notably_does() -> None:
    found = rig(material={"conductivity": None, "name": "stainless AISI 304"})
    warm = found.warmed(350.0, (300.0, 400.0))
    assert warm.change is not None
    law, handbook = warm.change.law(warm.conductivity.value), find("stainless AISI 304").conductivity
    assert [law.at(t) for t in (300.0, 350.0, 400.0)] == pytest.approx(
        [handbook.at(t) for t in (300.0, 350.0, 400.0)], rel=1e-3
    )
    assert found.warmed(350.0, (349.0, 351.0)).change is None
    assert "changing by" in next(f.message for f in warm.assumed if f.evidence.get("key") == "material")


def test_a_conductivity_that_would_vanish_is_refused() -> None:
    found = rig(material={"temperature_coefficient": "-0.02 1/K"})
    with pytest.raises(InputError) as caught:
        finback.fit(found, exact_readings(found, Truth(**HOT)))
    assert str(caught.value) == (
        'run "exact": the conductivity would be -1 times the stated one at 120 °C; check '
        "temperature_coefficient in [material], a relative change a kelvin."
    )


# estimates


def test_h_of_free_convection_belongs_to_the_mean_excess_of_the_fin() -> None:
    found = rig(air={"speed": "0 m/s"}, candidates={"exponent": 0.25, "surface_laws": ["free-convection"]})
    truth = Truth(h=9.0, exponent=0.25, **HOT)
    estimate, true = fit(found, truth)
    readings, _ = draw(found, truth, np.random.default_rng(1))
    excess = posing.reference_excess(found, readings)
    assert 60 < excess < 98
    assert_near(estimate, "h", true.h * (excess / REFERENCE) ** 0.25)
    assert_near(estimate, "k", true.k)
    assert any("excess temperature that h belongs to" in line for line in estimate.priors)
    assert estimate.parameters["exponent"].median == 0.25


def test_an_emissivity_parts_radiation_from_convection() -> None:
    found = rig(
        material={"emissivity": "0.9 +/- 0.03"}, air={"surroundings_temperature": "15 degC +/- 0.5 K"}
    )
    truth = Truth(h=7.0, emissivity=0.9, surroundings=ZERO + 15.0, **HOT)
    estimate, true = fit(found, truth)
    for name, value in {
        "h": 7.0,
        "k": true.k,
        "joint": 5e-5,
        "emissivity": 0.9,
        "surroundings": 15.0,
    }.items():
        assert_near(estimate, name, value)
    solution = true.solve(found, np.zeros(1))
    assert_near(estimate, "heat_radiated", float(solution.radiated_heat[0]))
    assert_near(estimate, "heat_convected", float(solution.base_heat[0] - solution.radiated_heat[0]))


def test_a_total_coefficient_is_larger_than_its_convective_part() -> None:
    truth = Truth(h=7.0, emissivity=0.9, **HOT)
    found = rig()
    total = optimum.fit(posing.pose(found, exact_readings(found, truth), enumerate_candidates(found)[0]))
    h = float(np.exp(total.z[total.problem.names.index("h")]))
    assert 7.0 + 0.9 * 6.0 < h < 7.0 + 0.9 * 9.0  # 4 eps sigma T³ is 6 to 9 W/(m² K) from 25 to 70 °C of film


def test_readings_that_can_tell_the_law_support_the_true_one() -> None:
    # k known, a tip 60 K colder than the base: h θⁿ bends the profile by far more than 0.05 K
    found = rig(
        material={"conductivity": "15 W/(m K) +/- 2 %"},
        candidates={"surface_laws": ["uniform", "free-convection", "varying"]},
    )
    for true, law in (
        (Truth(h=9.0, exponent=0.33, **HOT | {"k": 15.0}), "free convection"),
        (Truth(h=9.0, rise=0.8, **HOT | {"k": 15.0}), "h varying along the fin"),
    ):
        estimate, _ = fit(found, true)
        assert law in estimate.candidates[0].name
        assert estimate.candidates[0].probability > 0.9
        assert "support" in estimate.comparison


def test_readings_that_cannot_tell_the_law_say_so() -> None:
    # a copper pin whose tip is within a few kelvin of its base: every law gives the same profile
    found = rig(material={"conductivity": "390 W/(m K) +/- 2 %"}, air={"speed": "0 m/s"})
    estimate, _ = fit(found, Truth(h=9.0, exponent=0.25, **HOT | {"k": 390.0}))
    assert 0.2 < estimate.candidates[0].probability < 0.8
    assert "cannot tell" in estimate.comparison


def test_k_of_a_changing_conductivity_belongs_to_its_reference() -> None:
    found = rig(
        material={
            "conductivity": None,
            "name": None,
        },
    )
    truth = Truth(h=30.0, coefficient=-8e-4, **HOT)
    stated = rig(material={"conductivity": "167 W/(m K) +/- 20 %", "temperature_coefficient": "-8e-4 1/K"})
    assert stated.change is not None
    assert stated.change.reference == T0
    point = optimum.fit(posing.pose(stated, exact_readings(stated, truth), enumerate_candidates(stated)[0]))
    found_k = float(np.exp(point.z[point.problem.names.index("k")]))
    assert found_k == pytest.approx(167.0, rel=1e-3)
    free = optimum.fit(posing.pose(found, exact_readings(found, truth), enumerate_candidates(found)[0]))
    assert np.exp(free.z[free.problem.names.index("k")]) < 160.0  # it is k where the fin is warm


# the plate


PLATE = {"fins": 24, "bare_area": "0.011 m^2", "losses": "4 W +/- 0.5 W"}
LADEN = Truth(h=25.0, fins=24, bare_area=0.011, loss=4.0, **HOT)


def test_the_heater_of_a_plate_tells_the_heat_where_losses_are_stated() -> None:
    found = rig(("plate", "air", "heater"), material={"conductivity": None}, plate=PLATE)
    estimate, true = fit(found, LADEN)
    for name, value in {"h": true.h, "k": true.k, "joint": 5e-5, "loss": 4.0}.items():
        assert_near(estimate, name, value)
    (power,) = [row for row in estimate.table if row.sensor == "P"]
    assert power.predicted == pytest.approx(estimate.derived["plate_heat"].median, rel=0.02)


def test_without_losses_the_heater_is_an_upper_bound() -> None:
    stated = {name: value for name, value in PLATE.items() if name != "losses"}
    found = rig(("plate", "air", "heater"), material={"conductivity": None}, plate=stated)
    assert not found.losses_stated
    problem = posing.pose(found, exact_readings(found, LADEN), enumerate_candidates(found)[0])
    assert [sensor.name for sensor in problem.measured.bounds] == ["P"]
    assert {f.evidence.get("key") for f in found.assumed} >= {"losses", "bare_area"}


def test_losses_may_grow_with_the_plate() -> None:
    found = rig(("plate", "air", "heater"), plate={"losses": "0.04 W/K"})
    fin, _, air = found.build(BASE | {"plate": 380.0}, "convective")
    balance = plate_heat(
        found.plate_of(BASE | {"plate": 380.0, "loss_coefficient": 0.04}, fin), 3.0, 380.0, air
    )
    assert balance.total == pytest.approx([3.0 + 0.04 * (380.0 - 295.0)])


def test_a_heat_sensor_reads_all_fins() -> None:
    found = rig(plate={"fins": 24})
    problem = posing.pose(found, exact_readings(found, LADEN), enumerate_candidates(found)[0])
    values = {"h": 25.0, "k": 167.0, "joint": 5e-5, "plate": HOT["plate"], "air": HOT["air"]}
    at = [values[name] for name in problem.names]
    z = np.array(
        [[np.log(v) if p.transform == "log" else v for p, v in zip(problem.parameters, at, strict=True)]]
    )
    one = LADEN.solve(found, np.zeros(1)).base_heat[0]
    assert problem.predict(z)[0, -1] == pytest.approx(24 * one, rel=1e-9)


def test_a_heat_beyond_the_heater_names_the_plate() -> None:
    found = rig(("plate", "air", "heater"), plate={"fins": 24, "bare_area": "0.011 m^2"})
    readings = exact_readings(found, LADEN, power=20.0)
    estimate = finback.fit(found, readings, seed=1, settings=SHORT)
    (finding,) = [f for f in estimate.findings if f.code == "heat-balance"]
    assert "into the fins and from the bare plate, but P supplies 20 W" in finding.message


# air that nobody reads, and too few readings


def test_air_may_be_stated_where_nothing_reads_it() -> None:
    found = rig(("plate", "heat"), air={"temperature": "22 degC +/- 0.3 K"})
    estimate, true = fit(found, Truth(h=25.0, **HOT))
    for name, value in {"h": true.h, "k": true.k, "air": 22.0}.items():
        assert_near(estimate, name, value)
    assert not any(f.evidence.get("key") == "temperature" for f in estimate.findings)


def test_air_is_read_or_stated() -> None:
    with pytest.raises(InputError) as caught:
        rig(air={"temperature": "22 degC"})
    assert str(caught.value) == (
        "[air] temperature: a sensor reads the air, so its temperature is no statement of the rig; leave it "
        "out, or the sensor."
    )


def test_a_candidate_with_more_unknowns_than_readings_is_left_out() -> None:
    holes = {"T1": {"at": "5 mm"}, "T2": {"at": "45 mm"}, "T3": {"at": "95 mm"}, "TA": {"on": "air"}}
    found = Rig.from_dict(
        {
            "fin": {"profile": "pin", "length": "100 mm", "diameter": "6 mm"},
            "material": {"conductivity": "167 W/(m K) +/- 2 %"},
            "sensors": holes | {"defaults": {"calibration": "0 K", "position": "0 mm"}},
        }
    )
    estimate = finback.fit(found, exact_readings(found, Truth(joint=None)), settings=SHORT)
    assert {score.name for score in estimate.candidates} == {"adiabatic tip", "convective tip"}
    assert estimate.compared.endswith("too few readings for fixed tip.")
