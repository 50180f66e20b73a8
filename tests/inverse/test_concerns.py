"""Findings and the sentence on the candidates, from results made by hand."""

from types import SimpleNamespace

import numpy as np
import pytest

from finback import concerns
from finback.estimate import CandidateScore, FitQuality, SamplerRecord, Summary
from finback.findings import Finding
from finback.quantity import Quantity
from finback.sensors import Sensor
from finback.thermocouples import CLASSES

NAMES = ("h", "k", "joint", "h_over_k", "joint_times_k", "base_temperature", "heat", "transverse_biot")
LABELS = {"h": "convection coefficient h", "k": "conductivity k", "joint": "joint resistance R''"}
VALUES = {"h": 45.0, "k": 167.0, "joint": 5e-5, "transverse_biot": 5e-4, "heat": 4.6}


def summary(name: str, median: float | None, high: float | None = None) -> Summary:
    label = LABELS.get(name, name.replace("_", " "))
    known = median is not None
    numbers = [median, median, 0.1, median * 0.9, median * 1.1] if known else [None, None, None, None, high]
    return Summary(name, label, "W", *numbers, None, None, "readings" if known else "prior")


def quantities(**changes: Summary) -> dict[str, Summary]:
    return {name: summary(name, VALUES.get(name, 1.0)) for name in NAMES} | changes


def best(
    bounds: tuple[float, ...] = (),
    places: tuple[str, ...] = ("fin", "air"),
    joint: bool = True,
    thermocouples: dict[str, float] | None = None,
) -> SimpleNamespace:
    """As much of an outcome as findings look at."""
    read = thermocouples or {}
    extra = [Sensor(name, "fin", 0.0, calibration_class=CLASSES["T class 1"]) for name in read]
    measured = SimpleNamespace(
        sensors=[*(Sensor(place, place) for place in places), *extra],
        values=np.array([300.0] * len(places) + list(read.values())),
        bounds=[SimpleNamespace(name=f"PH{i}") for i in range(len(bounds))],
        bound_values=np.array(bounds),
        bound_sds=0.1 * np.ones(len(bounds)),
    )
    candidate = SimpleNamespace(joint_possible=joint)
    problem = SimpleNamespace(measured=measured, candidate=candidate, fixed={})
    return SimpleNamespace(problem=problem, disagreeing=())


def rig(conductivity: Quantity | None = None, assumed: tuple[Finding, ...] = ()) -> SimpleNamespace:
    measured = {"conductivity": conductivity, "tells_heat": lambda place: place == "heat"}
    measured["surroundings"] = SimpleNamespace(air=None)
    return SimpleNamespace(assumed=assumed, **measured)


GOOD = FitQuality({}, 7.0, 7, 0.43, None)
DONE = SamplerRecord("emcee", 1000, 2000.0, 1.001, 1, converged=True)


def collect(
    found: dict[str, Summary], *, quality: FitQuality = GOOD, sampler: SamplerRecord = DONE, **more: object
) -> tuple[Finding, ...]:
    posed = {"rig": rig(), "best": best()} | more
    heat = found["heat"].median
    return concerns.collect(posed["rig"], found, quality, sampler, posed["best"], heat=heat)


def test_a_good_fit_has_nothing_to_say() -> None:
    assert collect(quantities()) == ()


def test_what_the_rig_assumes_is_passed_on() -> None:
    assumption = Finding("assumed", "note", "No calibration is stated.")
    assert collect(quantities(), rig=rig(assumed=(assumption,))) == (assumption,)


def test_each_null_is_explained_once() -> None:
    found = collect(quantities(h=summary("h", None), k=summary("k", None), heat=summary("heat", None)))
    assert {f.code for f in found} == {"not-determined"}
    assert sorted(f.evidence["quantity"] for f in found) == ["h", "heat", "k"]
    for finding in found:
        assert finding.message[0].isupper()
        assert finding.message.endswith(".")
        assert finding.severity == "caution"


def test_h_and_k_are_named_by_their_ratio_only_where_nothing_parts_them() -> None:
    nulls = {"h": summary("h", None), "k": summary("k", None)}
    together = collect(quantities(**nulls))
    assert all("h/k = 1 1/m" in f.message for f in together)
    for parted in ({"rig": rig(Quantity(167.0, 5.0))}, {"best": best(places=("fin", "air", "heat"))}):
        assert not any("h/k" in f.message for f in collect(quantities(**nulls), **parted))


def test_a_limit_is_said_as_one_and_is_no_concern() -> None:
    (finding,) = collect(quantities(joint=summary("joint", None, high=4e-6)))
    assert finding.severity == "note"
    assert "at most 4.00 × 10⁻⁶" in finding.message


def test_without_a_plate_the_joint_is_only_noted() -> None:
    nulls = {name: summary(name, None) for name in ("joint", "joint_times_k")}
    (finding,) = collect(quantities(**nulls), best=best(joint=False))
    assert finding.severity == "note"
    assert "plate" in finding.message


@pytest.mark.parametrize(("p_value", "said"), [(0.5, False), (0.02, False), (1e-3, True), (None, False)])
def test_a_misfit_is_improbable_chi_square(p_value: float | None, said: bool) -> None:
    found = collect(quantities(), quality=FitQuality({}, 30.0, 7, p_value, None))
    assert [f.code for f in found] == (["misfit"] if said else [])


@pytest.mark.parametrize(("biot", "said"), [(0.09, False), (0.11, True)])
def test_a_thick_fin(biot: float, said: bool) -> None:
    found = collect(quantities(transverse_biot=summary("transverse_biot", biot)))
    assert [f.code for f in found] == (["thick-fin"] if said else [])


@pytest.mark.parametrize(("power", "said"), [(4.7, False), (4.5, False), (4.3, True)])
def test_the_heat_may_not_exceed_a_heater_by_two_standard_uncertainties(power: float, said: bool) -> None:
    found = collect(quantities(), best=best(bounds=(power, 50.0)))
    assert [(f.code, f.severity, f.sensor) for f in found] == (
        [("heat-balance", "fault", "PH0")] if said else []
    )


@pytest.mark.parametrize(
    ("read", "said"),
    [
        ({"T1": 300.0, "T2": 620.0}, None),  # T class 1 holds from -40 to 350 degC, IEC 60584-1
        ({"T1": 300.0, "T2": 624.0}, '"T2"'),
        ({"T1": 230.0, "T2": 624.0}, '"T1", "T2"'),
    ],
)
def test_a_reading_beyond_the_range_of_its_thermocouple_class(
    read: dict[str, float], said: str | None
) -> None:
    found = collect(quantities(), best=best(thermocouples=read))
    if said is None:
        assert found == ()
        return
    (finding,) = found
    assert (finding.code, finding.severity) == ("out-of-range", "note")
    assert finding.sensor == (None if "," in said else "T2")
    assert finding.message == (
        f'{said} read outside −40 to 350 °C, where IEC 60584-1:2013 gives no tolerance for "T class 1": '
        "it is taken to go on as within."
    )


def test_gravest_findings_come_first() -> None:
    assumption = Finding("assumed", "note", "No calibration is stated.")
    found = collect(
        quantities(h=summary("h", None)),
        rig=rig(assumed=(assumption,)),
        best=best(bounds=(1.0,)),
        sampler=SamplerRecord("emcee", 10, 5.0, 1.4, 1, converged=False),
    )
    severities = [f.severity for f in found]
    assert severities == ["fault", "caution", "caution", "note"]


def test_a_sampler_that_has_not_converged() -> None:
    for rhat in (1.4, None):
        (finding,) = collect(quantities(), sampler=SamplerRecord("emcee", 10, 5.0, rhat, 1, converged=False))
        assert finding.code == "not-converged"
        assert "provisional" in finding.message


def score(name: str, probability: float) -> CandidateScore:
    return CandidateScore(name, probability, 0.0, 0.01, None, None, None)


def test_one_candidate() -> None:
    assert concerns.compare_in_words([score("convective tip", 1.0)], True).endswith("that the rig states.")


def test_a_clear_candidate_is_supported() -> None:
    found = concerns.compare_in_words([score("adiabatic tip", 0.93), score("convective tip", 0.07)], False)
    assert found == "The readings support the adiabatic tip (probability 0.93)."


def test_rivals_are_named_and_the_improbable_are_not() -> None:
    scores = [score("adiabatic tip", 0.5), score("convective tip", 0.48), score("fixed tip", 0.02)]
    found = concerns.compare_in_words(scores, False)
    assert "cannot tell between adiabatic tip (0.5) and convective tip (0.48)" in found
    assert "fixed" not in found


def test_air_that_nobody_reads_is_said_to_be_assumed() -> None:
    findings = collect(quantities(air=summary("air", 25.0)), best=best(places=("fin", "plate")))
    assert [f.code for f in findings] == ["assumed"]
    assert 'temperature = "21 degC +/- 1 K" in [air]' in findings[0].message


def test_a_profile_that_speaks_of_far_other_air_is_a_concern() -> None:
    findings = collect(quantities(air=summary("air", 96.0)), best=best(places=("fin", "plate")))
    assert [f.code for f in findings] == ["air-reference", "assumed"]
    assert "air at 96 °C" in findings[0].message


def test_a_missing_aicc_is_explained() -> None:
    scores = [
        CandidateScore(name, 0.5, -1.0, 0.01, 1.0, aicc, 1.0) for name, aicc in (("a", 3.0), ("b", None))
    ]
    (finding,) = concerns.scored(scores)
    assert finding.message == "AICc needs two readings more than unknowns, and is not given for b."
    assert concerns.scored(scores[:1]) == ()
