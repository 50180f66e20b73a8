"""The face of a diagnosis: its words, its waterfall, its page and its summary, from invented diagnoses."""

import json
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from pages import Page
from rich.cells import cell_len

from finback import datasets, readings, rig
from finback.causes import NAMES, Cause, Cost, Together
from finback.diagnosis import Diagnosis
from finback.errors import InputError
from finback.estimate import Provenance
from finback.findings import Finding
from finback.next_measurements import NextMeasurement
from finback.report import (
    diagnosis_figure,
    diagnosis_files,
    diagnosis_page,
    diagnosis_scenes,
    diagnosis_terminal,
    diagnosis_view,
    diagnosis_words,
)
from finback.restoring import Interval
from finback.suspects import ODDS

PROVENANCE = Provenance("0.1.0", {"python": "3.11.7"}, {"/rigs/rig.toml": "9f" * 32})
LINES = (
    'Nothing reads the plate: add TP = { on = "plate" } to [sensors], and expected = "5e-5 m^2 K/W" there.'
)


def interval(median: float, half: float, unit: str) -> Interval:
    return Interval(median, median - half, median + half, unit)


def cause(
    name: str,
    probability: float,
    *,
    watts: float = 0.0,
    kelvin: float = 0.0,
    code: str = "joint",
    message: str = "It is 8 times the healthy; put right, more would flow.",
) -> Cause:
    """Return a cause of this name, sensors in brackets; what it brings is known to a tenth of it."""
    kinds = {words: kind for kind, words in NAMES.items()}
    first, _, other = name.partition(" (")[2].removesuffix(")").partition(" and ")
    return Cause(
        code=code,
        kind=kinds.get(name.partition(" (")[0], "healthy"),
        name=name,
        sensor=first or None,
        other=other or None,
        probability=probability,
        message=message,
        heat_recovered=interval(watts, 0.1 * abs(watts), "W"),
        base_temperature_change=interval(kelvin, 0.1 * abs(kelvin), "K"),
    )


HEALTHY = cause("nothing wrong", 0.004, code="healthy", message="Nothing is wrong.")
JOINT = cause("bad joint", 0.95, watts=1.6, kelvin=18.0)
WRONG_T4 = cause("wrong thermometer (T4)", 0.97, code="sensor-outlier", message="T4 reads 5 ± 0.2 K higher.")


def cost(what: str, watts: float, degrees: float, cause: str | None = None) -> Cost:
    return Cost(what, cause, interval(watts, 0.15, "W"), interval(degrees, 0.4, "degC"))


@pytest.fixture(scope="module")
def joint() -> Diagnosis:
    """An invented diagnosis of a bad joint, on the rig and the readings of a bundled one."""
    folder = datasets.path("bench-pin-loose-joint")
    described = rig.read(folder / "rig.toml")
    return Diagnosis(
        rig=described,
        readings=readings.read(folder / "readings.csv", described).pick(None),
        healthy_probability=0.004,
        fin_healthy_probability=0.03,
        doubt=0.4,
        causes=(JOINT, cause("low convection", 0.06, watts=0.5, kelvin=-2.0, code="low-convection"), HEALTHY),
        together=(Together(("bad joint", "low convection"), 0.02),),
        costs=(
            cost("now", 2.95, 56.4),
            cost("with a healthy joint", 4.55, 74.4, "bad joint"),
            cost("healthy", 4.5, 73.4),
        ),
        measurement_faults=(),
        next_measurements=(
            NextMeasurement("second power level", "A second run with more heat", 0.2, "0.20 bit.", 0.75),
            NextMeasurement("swap test of T1 and T2", "T1 and T2 exchanged", 0.01, "0.01 bit.", 0.999),
        ),
        cannot_tell=(),
        missing=(),
        findings=(Finding("assumed", "note", "No uncertainty is stated of the joint: 30 %."),),
        profile=(np.array([0.0, 0.12]), np.array([330.0, 310.0])),
        seed=1,
        provenance=PROVENANCE,
    )


# --- words -----------------------------------------------------------------------------------------------


def test_every_cause_has_its_words() -> None:
    assert diagnosis_words.IS_WRONG.keys() == diagnosis_words.REPAIRS.keys() == ODDS.keys() == NAMES.keys()
    for name in NAMES.values():
        told = cause(f"{name} (T3 and T4)", 0.9)
        for clause in (diagnosis_words.is_wrong(told), diagnosis_words.repair(told)):
            assert clause
            assert "{" not in clause
    assert "T3 and T4 are swapped" in diagnosis_words.is_wrong(cause("swapped sensors (T3 and T4)", 0.9))


@pytest.mark.parametrize(
    ("probability", "words"),
    [(1.0, "practically certain"), (0.9, "very likely"), (0.5, "more likely than not"), (0.1, "unlikely")],
)
def test_how_sure_in_words(probability: float, words: str) -> None:
    assert diagnosis_words.surely(probability) == words


def test_a_bad_joint_is_told_with_its_cost_and_its_repair(joint: Diagnosis) -> None:
    seen = diagnosis_view.build(joint)
    assert seen.headline == "The joint between plate and fin is bad: that is very likely (95.0 %)."
    assert seen.number == "It is 8 times the healthy."
    assert seen.cost == (
        "That costs 1.60 W (95 %: 1.44 to 1.76): 2.95 W flow into the fin now, 4.50 W would if it were "
        "healthy. Put right, the base of the fin would be 18.0 K (95 %: 16.2 to 19.8) hotter."
    )
    assert seen.action.startswith("With the power off and the fin cold, open the joint")
    assert "be surer" not in seen.action
    assert (seen.status, seen.status_text) == ("caution", "Something is wrong")


def test_what_is_only_likely_is_to_be_measured_first(joint: Diagnosis) -> None:
    seen = diagnosis_view.build(
        replace(joint, causes=(replace(JOINT, probability=0.7), *joint.causes[1:]), together=())
    )
    assert "more likely than not (70.0 %)" in seen.headline
    assert seen.action.endswith("To be surer, add this measurement: a second run with more heat.")


def test_where_no_cause_is_likely_the_two_likeliest_are_named(joint: Diagnosis) -> None:
    rivals = replace(JOINT, probability=0.45), cause("low conductivity", 0.4, watts=1.0), HEALTHY
    told = "These readings cannot tell apart: bad joint (0.45) and low conductivity (0.40)."
    seen = diagnosis_view.build(replace(joint, causes=rivals, together=(), cannot_tell=(told,)))
    assert seen.headline == (
        "It is not clear what is wrong. Likeliest: the joint between plate and fin is bad (45.0 %), or the "
        "fin conducts heat worse than it should (40.0 %)."
    )
    assert seen.status_text == "Not clear"
    assert seen.action == "Before anything is changed, add this measurement: a second run with more heat."
    assert seen.cannot_tell == (told,)


def test_two_things_at_once_are_both_told(joint: Diagnosis) -> None:
    pair = Together(("bad joint", "wrong thermometer (T4)"), 0.93)
    seen = diagnosis_view.build(replace(joint, causes=(WRONG_T4, JOINT, HEALTHY), together=(pair,)))
    assert seen.headline == (
        "The thermometer T4 reads wrong, and the joint between plate and fin is bad: that is very likely "
        "(93.0 %)."
    )
    assert "open the joint" in seen.action
    assert "Compare T4 with a good thermometer" in seen.action


def test_a_wrong_thermometer_leaves_the_fin_healthy(joint: Diagnosis) -> None:
    even = (cost("now", 4.5, 75.0), cost("healthy", 4.5, 75.0))
    seen = diagnosis_view.build(
        replace(joint, causes=(WRONG_T4, HEALTHY), together=(), costs=even, fin_healthy_probability=0.96)
    )
    assert seen.headline.endswith("The fin itself seems healthy (96.0 %).")
    assert seen.cost.endswith("; a healthy fin does the same.")
    assert seen.number == "T4 reads 5 ± 0.2 K higher."


def test_nothing_wrong_is_limited_to_what_could_be_judged(joint: Diagnosis) -> None:
    fine = replace(joint, causes=(replace(HEALTHY, probability=0.93),), together=(), healthy_probability=0.93)
    fine = replace(fine, fin_healthy_probability=0.97)
    assert diagnosis_view.build(fine).headline == (
        "Nothing seems wrong, in the fin or in its readings: that is very likely (93.0 %)."
    )
    seen = diagnosis_view.build(replace(fine, missing=(LINES,)))
    assert seen.headline.startswith("Nothing seems wrong with what could be judged")
    assert "cannot be told in full" in seen.cost
    assert seen.action.startswith("Add to rig.toml the lines under “What could not be judged”")
    assert seen.costs[-1].what == "healthy, as far as judged"


def test_a_cause_whose_cost_nothing_tells_is_told_without_one(joint: Diagnosis) -> None:
    unseen = replace(JOINT, heat_recovered=None, base_temperature_change=None)
    found = replace(joint, causes=(unseen, HEALTHY), together=())
    assert "That costs" not in diagnosis_view.build(found).cost
    assert diagnosis_scenes.waterfalls(found)[0].steps == ()


def test_what_a_measurement_tells_is_a_share_of_the_doubt(joint: Diagnosis) -> None:
    none = diagnosis_view.build(replace(joint, doubt=0.0)).next[0]
    assert (none.gain, none.bits) == ("no doubt of the cause is left", "–")
    even = replace(joint, doubt=1.0)
    gains = [row.gain for row in diagnosis_view.build(even).next]
    assert gains == ["settles part of the doubt", "tells hardly anything of the cause"]


# --- the waterfall ---------------------------------------------------------------------------------------


def test_the_steps_lead_from_now_to_healthy(joint: Diagnosis) -> None:
    heat, base = diagnosis_scenes.waterfalls(joint)
    assert base is not None
    # by hand: 2.95 + 0.95 * 1.6 = 4.47, + 0.06 * 0.5 = 4.50; 56.4 + 0.95 * 18 = 73.5, - 0.06 * 2 = 73.38
    assert [step.start for step in heat.steps] == pytest.approx([2.95, 4.47])
    assert [step.expected for step in heat.steps] == pytest.approx([1.52, 0.03])
    assert [step.whole for step in heat.steps] == [1.6, 0.5]
    assert [step.start for step in base.steps] == pytest.approx([56.4, 73.5])
    assert (heat.now.text, heat.healthy.text) == ("2.95 W", "4.50 W")
    assert [step.text for step in heat.steps] == ["+1.60 W", "+0.500 W"]
    assert [step.text for step in base.steps] == ["+18.0 K", "−2.00 K"]
    assert heat.steps[1].name == "low convection\nput right (6.0 %)"


def test_what_the_steps_do_not_reach_has_a_step_of_its_own(joint: Diagnosis) -> None:
    found = replace(joint, causes=(JOINT, HEALTHY), costs=(joint.costs[0], cost("healthy", 5.0, 80.0)))
    heat, base = diagnosis_scenes.waterfalls(found)
    assert base is not None
    for fall, start, end in ((heat, 4.47, 5.0), (base, 73.5, 80.0)):
        rest = fall.steps[-1]
        assert (rest.start, rest.start + rest.expected) == pytest.approx((start, end))
        assert rest.name == "the rest\nput right"
    assert heat.steps[-1].text == "+0.53 W"
    nearly = replace(found, costs=(joint.costs[0], cost("healthy", 5.0, 73.5)))  # the base has no rest
    heat, base = diagnosis_scenes.waterfalls(nearly)
    assert base is not None
    assert [step.name for step in heat.steps] == [step.name for step in base.steps]


def test_each_line_of_costs_has_what_its_cause_brings(joint: Diagnosis) -> None:
    now, line, healthy = diagnosis_view.build(joint).costs
    assert (line.more, line.warmer) == ("+1.60 W (1.44 to 1.76)", "+18.0 K (16.2 to 19.8)")
    assert {now.more, now.warmer, healthy.more, healthy.warmer} == {""}


def test_a_wrong_thermometer_has_no_step_and_nothing_moves_the_base(joint: Diagnosis) -> None:
    found = replace(joint, causes=(WRONG_T4, replace(JOINT, base_temperature_change=interval(0, 0, "K"))))
    heat, base = diagnosis_scenes.waterfalls(found)
    assert [step.name.split("\n")[0] for step in heat.steps] == ["bad joint"]
    assert base is None
    pictures = diagnosis_figure.draw(found)
    assert [picture.name for picture in pictures] == list(diagnosis_figure.NAMES)
    assert b"<svg" in pictures[0].svg
    assert pictures[0].png.startswith(b"\x89PNG")


def test_a_wrong_reading_points_to_what_it_should_be(joint: Diagnosis) -> None:
    values = joint.readings.values
    outlier = Finding("sensor-outlier", "fault", "T4 reads high.", "T4", {"error": 5.0, "sd": 0.2})
    also = Finding("position-shift", "note", "Or its hole lies off.", "T4", {"error": 4.0, "sd": 0.2})
    swap = Finding("sensor-swap", "fault", "T1 and T2 are swapped.", "T1", {"other": "T2"})
    heat = Finding("heat-balance", "fault", "Q reads more.", "Q", {"error": 0.4, "sd": 0.1})
    found = replace(joint, measurement_faults=(outlier, also, swap, heat))
    reads = {read.name: read for read in diagnosis_scenes.temperatures(found)}
    assert "Q" not in reads
    assert reads["T4"].should == pytest.approx(values["T4"] - 5.0 - 273.15)
    assert reads["T1"].should == pytest.approx(values["T2"] - 273.15)
    assert reads["T2"].should == pytest.approx(values["T1"] - 273.15)
    assert {name for name, read in reads.items() if read.should is not None} == {"T4", "T1", "T2"}


# --- page and summary ------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def page(joint: Diagnosis) -> Page:
    found = replace(
        joint, missing=(LINES,), measurement_faults=(Finding("misfit", "caution", "It scatters."),)
    )
    return Page(diagnosis_page.render(found, diagnosis_figure.draw(found)))


def test_the_page_has_every_section_and_loads_nothing(page: Page) -> None:
    sections = [
        "answer",
        "causes",
        "costs",
        "next",
        "faults",
        "missing",
        "assumptions",
        "provenance",
        "cautions",
    ]
    assert [section["id"] for section in page.named("section")] == sections
    tags = {tag for tag, _ in page.elements}
    assert not tags & {"script", "link", "iframe", "object", "embed", "form", "base", "audio", "video"}
    assert all(image["src"].startswith("data:") and image["alt"] for image in page.named("img"))
    assert len(page.named("img")) == 2


def test_the_page_tells_causes_costs_measurements_and_cautions(page: Page) -> None:
    assert "The joint between plate and fin is bad" in page.texts["answer"]
    assert "95.0 %" in page.texts["causes"]
    assert "4.55 W" in page.texts["costs"]
    cells = page.texts["costs"].split("\n")
    healthy = cells[cells.index("healthy, as far as judged") :]
    assert [cell for cell in healthy if cell][:5] == [
        "healthy, as far as judged", "4.50 W", "4.35 to 4.65", "73.40 °C", "73.00 to 73.80"
    ]  # fmt: skip
    assert "25 % narrower" in page.texts["next"]
    assert "It scatters." in page.texts["faults"]
    assert f"bad joint {100 * ODDS['joint']:.0f}," in page.texts["assumptions"]
    assert "no certificate" in page.texts["cautions"]
    assert "/home" not in page.texts["provenance"]
    widths = [each["style"] for each in page.named("span") if "style" in each]
    assert widths == ["width: 95.0%", "width: 6.0%", "width: 0.4%"]


def test_the_lines_to_add_are_set_as_code_word_for_word() -> None:
    coded = str(diagnosis_page.coded(LINES))
    assert re.findall("<code>(.*?)</code>", coded) == [
        "TP = { on = &#34;plate&#34; }",
        "expected = &#34;5e-5 m^2 K/W&#34;",
    ]
    assert str(diagnosis_page.coded("<b> & no line")) == "&lt;b&gt; &amp; no line"


def test_what_the_user_named_is_shown_and_never_obeyed(joint: Diagnosis) -> None:
    hostile = "<script>alert(1)</script>\x1b[2J"
    found = replace(joint, rig=replace(joint.rig, title=hostile))
    found = replace(
        found, causes=(replace(WRONG_T4, name=f"wrong thermometer ({hostile})"), HEALTHY), together=()
    )
    text = diagnosis_page.render(found, ())
    assert "<script" not in text
    assert "&lt;script&gt;" in text
    summary = diagnosis_terminal.summary(found)
    assert all(character.isprintable() or character == "\n" for character in summary)


@pytest.mark.parametrize("title", ["A pin", "x" * 200, "冷却フィン " * 30])
def test_the_summary_fits_80_columns(joint: Diagnosis, title: str) -> None:
    costs = (
        *joint.costs[:1],
        cost("with the film coefficient of a healthy fin", 1234.5, 123.4),
        joint.costs[-1],
    )
    found = replace(joint, rig=replace(joint.rig, title=title), costs=costs, missing=(LINES,))
    *lines, path = diagnosis_terminal.summary(found, "a folder with a rather long name/" * 6).splitlines()
    assert path.endswith("name/report.html")
    assert max(cell_len(line) for line in lines) <= 79
    assert not any(line.endswith(" ") for line in lines)
    assert any("film coefficient of a healthy fin" in line for line in lines)


# --- files -----------------------------------------------------------------------------------------------


def test_it_writes_its_files_and_its_json_is_what_the_diagnosis_holds(
    joint: Diagnosis, tmp_path: Path
) -> None:
    unseen = replace(joint, causes=(*joint.causes, replace(JOINT, name="x", heat_recovered=None)))
    page = diagnosis_files.write(unseen, tmp_path / "out")
    written = sorted(
        str(p.relative_to(tmp_path / "out")) for p in (tmp_path / "out").rglob("*") if p.is_file()
    )
    assert written == sorted(diagnosis_files.OURS)
    assert page == tmp_path / "out" / "report.html"
    text = (tmp_path / "out" / "diagnosis.json").read_text(encoding="utf-8")
    assert json.loads(text, parse_constant=pytest.fail) == json.loads(json.dumps(unseen.to_dict()))
    assert json.loads(text)["causes"][-1]["heat_recovered"] is None


def test_an_earlier_result_is_refused_and_left_alone(joint: Diagnosis, tmp_path: Path) -> None:
    (tmp_path / "report.html").write_text("mine", encoding="utf-8")
    with pytest.raises(InputError) as caught:
        diagnosis_files.write(joint, tmp_path)
    assert str(caught.value) == (
        f"{tmp_path}: already holds an earlier result (report.html); choose another folder, or overwrite "
        "with --force."
    )
    assert [path.name for path in tmp_path.iterdir()] == ["report.html"]
    assert (tmp_path / "report.html").read_text(encoding="utf-8") == "mine"
