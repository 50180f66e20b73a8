"""Materials, emissivities and joints: every row against the handbook's data, and finding one by its name."""

import json
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from finback.models import contact_resistance, emissivity, materials
from finback.models.conductivity import (
    Conductivity,
    ConstantConductivity,
    LinearConductivity,
    TabulatedConductivity,
)
from finback.models.constants import STEFAN_BOLTZMANN
from finback.models.emissivity import radiation_coefficient
from finback.models.materials import Evidence
from finback.models.names import UnknownNameError, fold

DATA = json.loads((Path(__file__).parent / "data" / "handbook.json").read_text(encoding="utf-8"))
SINGLE = [row for row in DATA["conductivity"] if row["k_300K_W_mK"] is not None]
SURFACES = {  # where our name is shorter than the handbook's
    "aluminium, highly polished film / plate": "aluminium, highly polished",
    "stainless steel, cleaned / typical polished": "stainless steel, cleaned or polished",
    "iron plate, rusted": "iron, rusted",
    "paint, black (Parsons) / black gloss": "paint, black",
    "paint, oil, all colours": "paint, oil, any colour",
}


def said(verification):
    """What stands behind a row, in the terms of the handbook's data."""
    if verification.startswith("checked"):
        return Evidence.CHECKED
    return Evidence.RECALLED if "recalled" in verification else Evidence.COMPUTED


# --- conductivities --------------------------------------------------------------------------------


@pytest.mark.parametrize("row", SINGLE, ids=lambda row: row["material"])
def test_every_material_of_the_handbook(row):
    material = materials.find(row["material"])
    k, sd, flags = material.at(300.0)
    assert k == pytest.approx(row["k_300K_W_mK"], rel=2e-4)  # the handbook rounds its fits
    assert sd == pytest.approx(material.spread * k)
    assert flags == ()
    table = {float(T): value for T, value in row["k_table_W_mK"].items()}
    found = {T: float(material.conductivity.at(T)) for T in table}
    assert found == pytest.approx(table)
    assert material.evidence is said(row["verification"])
    assert material.source.split(",")[0].split()[0] in row["source"]


@pytest.mark.parametrize("row", SINGLE, ids=lambda row: row["material"])
def test_the_spread_covers_the_other_source_of_the_same_designation(row):
    material = materials.find(row["material"])
    same = [other["k"] for other in row["other_values"] if other.get("what") in (None, "2024-T6", "C26000")]
    apart = max((abs(k / row["k_300K_W_mK"] - 1) for k in same), default=0.0)
    assert material.spread >= max(round(apart, 3) - 1e-12, materials.LEAST_SPREAD)


def test_aluminium_alloys_are_as_uncertain_as_their_sources_are_apart():
    spreads = {each.name: each.spread for each in materials.MATERIALS if each.name.startswith("aluminium")}
    assert spreads["aluminium 6061-T6"] == pytest.approx(167 / 155.3 - 1, abs=5e-4)
    assert spreads["aluminium 2024-T6"] == pytest.approx(1 - 151 / 177, abs=5e-4)


def test_graphite_is_its_range_of_grades():
    (row,) = [row for row in DATA["conductivity"] if row["k_300K_W_mK"] is None]
    low, high = next(other["k"] for other in row["other_values"] if isinstance(other["k"], list))
    k, sd, _ = materials.find("graphite").at(300.0)
    assert k == (low + high) / 2
    assert sd == pytest.approx((high - low) / np.sqrt(12), rel=2e-3)


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("aluminium 1100", 211.79),
        ("aluminium 6063-T6", 201),
        ("aluminium 2024-T3", 121),
    ],
)
def test_a_relative_with_a_value_of_its_own(name, value):
    values = [other["k"] for row in DATA["conductivity"] for other in row["other_values"]]
    assert materials.find(name).at(298.0)[0] == value
    assert value in values


def test_a_table_is_straight_between_its_points():
    """Incropera, Example 3.9, takes 398 and 180 W/(m K) for copper and 2024 at 335 K, and 14 for 316."""
    at_335 = {name: float(materials.find(name).at(335.0)[0]) for name in ("copper", "2024-T6", "316")}
    assert at_335 == pytest.approx({"copper": 398, "2024-T6": 180, "316": 14}, rel=3e-3)


def test_a_law_that_is_left_is_a_flag():
    _, _, flags = materials.find("aluminium 6061-T6").at(np.array([290.0, 420.0]))
    assert [str(flag) for flag in flags] == [
        "k of aluminium 6061-T6 is stated for temperature from 200 to 300 K; here it is 420 K "
        "(1 of 2 values)."
    ]


def test_laws_have_the_members_of_the_protocol():
    laws = (
        ConstantConductivity(200.0),
        LinearConductivity(200.0, 300.0, -1e-4, 250.0, 400.0),
        TabulatedConductivity(((250.0, 190.0), (400.0, 210.0))),
    )
    for law in laws:
        assert isinstance(law, Conductivity)
        assert np.shape(law.at(np.array([260.0, 300.0]))) == (2,)
        assert law.temperatures.holds(300.0)
    assert laws[1].at(350.0) == pytest.approx(199.0)
    assert not laws[1].temperatures.holds(401.0)
    assert laws[2].at(325.0) == pytest.approx(200.0)
    assert laws[2].at(1000.0) == 210.0


@pytest.mark.parametrize(
    ("points", "sentence"),
    [
        (((300.0, 10.0),), "two points or more, in rising order"),
        (((300.0, 10.0), (300.0, 11.0)), "two points or more, in rising order"),
        (((400.0, 10.0), (300.0, 11.0)), "two points or more, in rising order"),
        (((300.0, 10.0), (400.0, -1.0)), "must be positive and finite"),
        (((300.0, 10.0), (400.0, np.nan)), "must be positive and finite"),
    ],
)
def test_a_table_that_cannot_be_is_refused(points, sentence):
    with pytest.raises(ValueError, match=sentence):
        TabulatedConductivity(points)


# --- names -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "name",
    ["aluminium 6061-T6", "Aluminum 6061 T6", " ALUMINIUM  6061-t6 ", "6061", "6061-T6", "AA 6061-T6"],
)
def test_one_material_by_many_names(name):
    assert materials.find(name).name == "aluminium 6061-T6"


def test_every_name_leads_to_one_row():
    for table in (materials.MATERIALS, emissivity.FINISHES, contact_resistance.JOINTS):
        names = [fold(alias) for each in table for alias in (each.name, *getattr(each, "aliases", ()))]
        assert len(names) == len(set(names))


@pytest.mark.parametrize("metal", ["aluminium", "bronze", "steel", "unobtainium", ""])
def test_a_name_that_does_not_settle_the_alloy_is_refused(metal):
    with pytest.raises(
        UnknownNameError, match=f"no material is called '{metal}'; the nearest are "
    ) as caught:
        materials.find(metal)
    assert isinstance(caught.value, ValueError)
    assert len(caught.value.nearest) == 3
    assert all(materials.find(name) for name in caught.value.nearest)
    assert str(caught.value).endswith(caught.value.nearest[-1])


def test_the_nearest_come_first():
    assert materials.nearest("alumnium 6061")[0] == "aluminium 6061-T6"
    assert materials.nearest("stainles 316", count=1) == ("stainless AISI 316",)
    assert emissivity.nearest("aluminium anodized")[0] == "aluminium, anodised"


@given(name=st.text(max_size=30))
def test_any_other_text_is_one_sentence(name):
    known = {fold(alias) for each in materials.MATERIALS for alias in (each.name, *each.aliases)}
    assume(fold(name) not in known)
    with pytest.raises(UnknownNameError, match=r"^no material is called .+; the nearest are .+ and .+$"):
        materials.find(name)


# --- surfaces --------------------------------------------------------------------------------------


@pytest.mark.parametrize("row", DATA["emissivity"], ids=lambda row: row["surface"])
def test_every_surface_of_the_handbook(row):
    finish = emissivity.find(SURFACES.get(row["surface"], row["surface"]))
    value = row["emissivity"]
    values = np.array([*(value if isinstance(value, list) else [value]), *row["other"]])
    assert finish.low <= values.min()
    assert finish.high >= values.max()
    assert finish.low <= finish.emissivity <= finish.high
    assert finish.spread >= 0.1 * finish.emissivity
    assert finish.evidence is said(row["verification"])


def test_there_is_no_surface_without_a_row():
    assert len(emissivity.FINISHES) == len(DATA["emissivity"])
    assert len(contact_resistance.JOINTS) == len(DATA["contact_resistance"])


def test_an_unknown_surface_names_the_nearest():
    with pytest.raises(UnknownNameError, match="no surface is called 'chrome'; the nearest are "):
        emissivity.find("chrome")


@given(
    eps=st.floats(0.0, 1.0),
    surface=st.floats(250.0, 900.0),
    around=st.floats(250.0, 900.0),
)
def test_radiation_is_the_difference_of_fourth_powers(eps, surface, around):
    flux = radiation_coefficient(eps, surface, around) * (surface - around)
    assert flux == pytest.approx(eps * STEFAN_BOLTZMANN * (surface**4 - around**4), rel=1e-12, abs=1e-9)


def test_an_emissivity_above_one_is_refused():
    with pytest.raises(ValueError, match=r"an emissivity must lie between 0 and 1, not 1\.3"):
        radiation_coefficient(1.3, 350.0, 300.0)


# --- joints ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("row", "kind"), list(zip(DATA["contact_resistance"], contact_resistance.JOINTS, strict=True))
)
def test_every_joint_of_the_handbook(row, kind):
    assert (kind.low, kind.high) == (row["R_m2K_W_low"], row["R_m2K_W_high"])
    assert kind.evidence is said(row["verification"])
    assert row["joint"].split("-")[0].split()[0].split(",")[0] in kind.name  # the same rows, in one order


def test_a_joint_is_usual_or_not():
    kind = contact_resistance.find("Copper on copper, air")
    assert kind.holds(6e-5)
    assert kind.holds(1.9e-4)
    assert not kind.holds(2.1e-4)
    assert not kind.holds(1.9e-5)
    with pytest.raises(UnknownNameError, match="no kind of joint is called 'glue'; the nearest are "):
        contact_resistance.find("glue")
