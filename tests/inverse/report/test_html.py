import re
from dataclasses import replace

import numpy as np
import pytest
from pages import Page

from finback.estimate import Draws, ProfileBand
from finback.expectation import Expected
from finback.report import figures, html

SECTIONS = [
    "answer", "drawing", "profile", "candidates", "pairs", "quantities", "budget", "readings", "findings",
    "assumptions", "method", "provenance", "cautions",
]  # fmt: skip


@pytest.fixture(scope="module")
def parsed(pages):
    return {name: Page(text) for name, text in pages.items()}


@pytest.mark.parametrize("name", ["pin", "rod", "hostile", "bench"])
def test_it_has_every_section_in_order_and_nothing_that_runs_or_loads(parsed, pages, name):
    page = parsed[name]
    expected = [section for section in SECTIONS if section != "budget" or name != "rod"]  # it has none
    assert [section["id"] for section in page.named("section")] == expected
    tags = {tag for tag, _ in page.elements}
    assert not tags & {"script", "link", "iframe", "object", "embed", "form", "base", "audio", "video"}
    for tag, attributes in page.elements:
        assert not any(key.startswith("on") for key in attributes), tag
        for key in ("src", "href", "srcset", "style", "background"):
            assert attributes.get(key, "data:").startswith("data:")
    outside = re.sub(r'src="data:[^"]*"', "", pages[name])
    assert not re.search(r"https?://|@import|url\(", outside)


def test_what_a_healthy_fin_would_show_has_a_section_where_a_correlation_tells_it(pin_estimate, pictures):
    expected = Expected(
        48.0, 7.0, "hilpert", "Hilpert, <cylinder>", 320.0, speed=1.5, nusselt=14.0, reynolds=680.0,
        prandtl=0.705, length=0.008, length_name="diameter", notes=("the air is dry",),
    )  # fmt: skip
    shown = Page(html.render(replace(pin_estimate, expected=expected), pictures["pin"]))
    at = SECTIONS.index("candidates")
    assert [s["id"] for s in shown.named("section")] == [*SECTIONS[:at], "healthy", *SECTIONS[at:]]
    section = shown.texts["healthy"]
    for told in ("Hilpert, <cylinder> (hilpert)", "46.9 °C", "diameter, 8 mm", "680", "0.705", "14.0"):
        assert told in section
    assert "Assumed: the air is dry." in section
    assert "A healthy fin would show h = 48 W/(m² K) ± 14 W/(m² K)" in shown.texts["answer"]
    stated = replace(pin_estimate, expected=Expected(48.0, 7.0, "stated", "as the rig states"))
    of_stated = Page(html.render(stated, pictures["pin"]))
    assert [s["id"] for s in of_stated.named("section")] == SECTIONS
    assert "as the rig states" in of_stated.texts["answer"]


@pytest.mark.parametrize("name", ["pin", "rod", "hostile", "bench"])
def test_every_picture_has_a_text_for_who_cannot_see_it(parsed, name):
    pictures = parsed[name].named("img")
    assert len(pictures) == (3 if name == "rod" else 5)
    for picture in pictures:
        assert picture["src"].startswith("data:image/svg+xml;base64,")
        assert len(picture["alt"]) > 40


def test_the_answer_comes_first_and_says_how_it_was_determined(parsed):
    answer = parsed["pin"].texts["answer"]
    assert "h = 42.0 W/(m² K) ± 1.9 W/(m² K) (k = 2, 95 %)" in answer
    assert "median 42.0 W/(m² K)95 % interval 40.1 to 43.9 W/(m² K)" in answer
    assert "determined by the readings" in answer
    assert "total coefficient: convection and radiation together" in answer
    assert "R″ = 5.2 × 10⁻⁵ m² K/W ± 1.7 × 10⁻⁵ m² K/W (k = 2, 95 %)" in answer
    assert "The readings favour a convective tip with a joint" in answer
    assert "T6 lies 1.5 K below what the others say." in answer


def test_what_is_not_determined_says_why(parsed):
    answer, quantities = parsed["rod"].texts["answer"], parsed["rod"].texts["quantities"]
    reason = "The readings along the fin determine h/k only: state the conductivity or measure the heat."
    assert answer.count(reason) == 3  # below h, below k, and as the finding
    assert "h not determined" in answer
    assert "k not determined" in answer
    assert "R″ not looked at" in answer
    assert "h/k = 0.0801 1/m ± 0.0011 1/m" in answer
    assert "at most 23.4" in quantities
    assert not re.search(r"\b(nan|None|inf)\b", answer + quantities)


def test_tables_hold_every_candidate_quantity_and_reading(parsed, pin_estimate):
    texts = parsed["pin"].texts
    for score in pin_estimate.candidates:
        assert score.name in texts["candidates"]
    assert "Few readings make LOO indicative only" in texts["candidates"]
    for row in pin_estimate.table:
        assert f"\n{row.sensor}\n" in texts["readings"]
    assert "set aside: judged faulty by the operator" in texts["readings"]
    assert "5.00 ± 0.50 mm\n72.99 °C\n72.87 °C\n0.12 K\n0.36 K\n0.3" in texts["readings"]
    for summary in (*pin_estimate.parameters.values(), *pin_estimate.derived.values()):
        assert summary.label.replace("R''", "")[:10] in texts["quantities"]


def test_the_page_of_a_real_fit_tells_what_the_estimate_holds(parsed, estimates):
    estimate, texts = estimates["bench"], parsed["bench"].texts
    for symbol in ("h = ", "k = ", "R″ = "):
        assert symbol in texts["answer"]
    assert estimate.comparison in texts["answer"]
    for row in estimate.table:
        assert f"\n{row.sensor}\n" in texts["readings"]
    assert f"R-hat {estimate.sampler.rhat_max:.3f}" in texts["provenance"]
    assert not re.search(r"\b(nan|None|inf)\b", "".join(texts.values()))


def test_the_budget_parts_random_systematic_and_prior(parsed):
    told = parsed["pin"].texts["budget"]
    assert "With the fin sensors calibrated to 0.1 K the interval of h would be 30 % narrower." in told
    assert "\nshare of the variance of\nh\nk\nh/k\nqb\n" in told
    assert "random: averages out over readings\n32 %\n38 %\n35 %\n94 %\n" in told  # sums of the two below
    assert "noise of the fin sensors\n8 %\n2 %\n35 %\n4 %\n" in told
    assert "systematic: does not average out\n55 %\n10 %\n62 %\n< 1 %\n" in told
    assert "others, each below 1 %\n< 1 %\n< 1 %\n< 1 %\n< 1 %\n" in told
    assert "wide defaults" not in told


def test_value_and_expanded_uncertainty_are_marked_where_they_do_not_hold(parsed):
    told = parsed["pin"].texts["quantities"]
    assert "42.0 ± 1.9\n" in told
    assert "(5.1 ± 1.1) × 10⁻⁵ †\n" in told
    assert parsed["pin"].texts["answer"].count("too bent for linear propagation") == 1


def test_a_wider_prior_of_the_joint_stands_beside_each_probability(parsed):
    told = parsed["pin"].texts["candidates"]
    assert "convective tip, no joint\n0.7 %\n1.6 %\n" in told
    assert "3 times as wide" in told
    assert "wider prior" not in parsed["rod"].texts["candidates"]


def test_assumptions_method_provenance_and_cautions_are_told(parsed, pin_estimate):
    texts = parsed["pin"].texts
    for line in pin_estimate.priors:
        assert line in texts["assumptions"]
    assert "The tip was left out of the rig" in texts["assumptions"]
    for equation in (
        "d²θ/dx² = m² θ",
        "m² = h P / (k A)",
        "−k θ′(0) = (Tplate − Tb) / R″",
        "Pᵢ = wᵢ Zᵢ / Σⱼ wⱼ Zⱼ",
    ):
        assert equation in texts["method"]
    for name, digest in pin_estimate.provenance.inputs.items():
        assert f"SHA-256 of {name}" in texts["provenance"]
        assert digest in texts["provenance"]
    for word in ("seed", "R-hat 1.004", "effective sample size 2412", "numpy 2.0.0"):
        assert word in texts["provenance"]
    for word in ("hot", "Mains-powered", "fans", "pressure", "Local codes", "no certificate"):
        assert word in texts["cautions"]


def test_what_the_user_named_is_shown_and_never_obeyed(parsed, pages, hostile_estimate):
    page = parsed["hostile"]
    assert "<script>alert(1)</script>" in page.texts[""]  # as text: title and heading
    assert "<script>alert(1)</script>" in page.named("img")[0]["alt"]
    assert "<script" not in pages["hostile"]
    names = re.findall(r"\n(.+)\n(?:fin|plate|air|heat into the fin)\n", page.texts["readings"])
    assert names == [
        row.sensor.replace("\x1b", "\N{REPLACEMENT CHARACTER}") for row in hostile_estimate.table
    ]
    assert {tag for tag, _ in page.elements} == {tag for tag, _ in parsed["pin"].elements}


def test_the_same_estimate_gives_the_same_bytes(pages, pin_estimate, pictures):
    assert html.render(pin_estimate, pictures["pin"]) == pages["pin"]


def test_no_path_of_the_machine_is_told(pin_estimate, pictures):
    inputs = {"/secret/place/rig.toml": "9f" * 32}
    told = replace(pin_estimate, provenance=replace(pin_estimate.provenance, inputs=inputs))
    page = html.render(told, pictures["pin"])
    assert "SHA-256 of rig.toml" in page
    assert "secret" not in page


def test_a_failed_estimate_without_draws_still_gives_a_page(rod_estimate):
    none = np.zeros(0)
    draws = Draws(
        (), (), np.zeros((0, 0, 0)), np.zeros((0, 0)), np.zeros((0, 0), int), np.zeros((0, 0, 0)), ()
    )
    empty = replace(
        rod_estimate, status="failed", band=ProfileBand(none, none, none, none), draws=draws, candidates=()
    )
    pictures = figures.draw(empty)
    assert [picture.name for picture in pictures] == ["drawing"]
    page = Page(html.render(empty, pictures))
    assert "Failed" in page.texts[""]
    assert "No draws to show." in page.texts["pairs"]
