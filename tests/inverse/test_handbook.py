"""A conductivity stated, looked up by a material's name, or left open; and what is said of each."""

from dataclasses import replace
from typing import Any

import pytest
from rigs import exact_readings, pin_rig

import finback
from finback import handbook
from finback.errors import InputError
from finback.rig import Rig


def rig(**material: Any) -> Rig:
    return Rig.from_dict(
        {
            "fin": {"profile": "pin", "length": "60 mm", "diameter": "6 mm"},
            "material": material,
            "sensors": {"T1": {"at": "5 mm"}, "TA": {"on": "air"}},
        }
    )


def said(found: Rig, key: str) -> list[str]:
    return [finding.message for finding in found.assumed if finding.evidence.get("key") == key]


@pytest.mark.parametrize("name", ["aluminium 6061-T6", "Aluminum 6061 T6", "6061"])
def test_a_name_stands_for_a_conductivity_and_its_spread(name: str) -> None:
    # NIST Cryogenic Material Properties, 6061-T6 at 300 K: 155.3 W/(m K); ASM prints 167, 7.5 % more
    found = rig(name=name)
    assert found.conductivity is not None
    assert found.conductivity.value == pytest.approx(155.32, rel=1e-4)
    assert found.conductivity.sd == pytest.approx(0.075 * 155.32, rel=1e-4)
    assert found.material == name
    (message,) = said(found, "material")
    assert message == (
        "The conductivity of aluminium 6061-T6 is a handbook's at 27 °C, 155 ± 12 W/(m K): NIST Cryogenic "
        "Material Properties database, fitted polynomial; state conductivity in [material] where more is "
        "known of the piece."
    )


def test_a_handbook_value_follows_the_temperature_of_the_readings() -> None:
    # Incropera, Table A.1, AISI 304: 14.9 W/(m K) at 300 K, 16.6 at 400 K
    steel = rig(name="AISI 304")
    assert steel.conductivity is not None
    assert steel.conductivity.value == pytest.approx(14.9)
    warm = steel.warmed(400.0)
    assert warm.conductivity is not None
    assert warm.conductivity.value == pytest.approx(16.6)
    assert [message for message in said(warm, "material") if "at 127 °C" in message]
    assert len(said(warm, "material")) == 1  # in the place of the one for room temperature
    stated = rig(conductivity="15 W/(m K) +/- 3 %")
    assert stated.warmed(400.0) is stated


def test_a_temperature_outside_the_handbook_is_a_flag() -> None:
    codes = [finding.code for finding in handbook.findings(handbook.look_up("6061", None), 400.0)]
    assert codes == ["assumed", "out-of-range"]
    hot = rig(name="6061").warmed(400.0).warmed(295.0)
    assert [finding.code for finding in hot.assumed].count("out-of-range") == 0


def test_a_fit_takes_the_conductivity_at_the_temperature_of_its_readings() -> None:
    bench = replace(
        pin_rig(places=("air",), tip="adiabatic"),
        material="AISI 304",
        handbook=handbook.look_up("AISI 304", None),
    ).warmed(handbook.ROOM)
    readings = exact_readings(bench)
    estimate = finback.fit(bench, readings, seed=1)
    k = estimate.rig.conductivity
    assert k is not None
    mean = sum(readings.values[f"T{n}"] for n in range(1, 9)) / 8
    assert k.value == pytest.approx(14.9 + 1.7 * (mean - 300) / 100, rel=0.01)
    assert estimate.parameters["k"].median == pytest.approx(k.value, rel=0.01)


def test_a_stated_conductivity_wins_over_a_name_and_keeps_it_as_a_label() -> None:
    found = rig(name="EN AW-6060 T66, heat 4711", conductivity="201 W/(m K) +/- 2 %")
    assert found.conductivity is not None
    assert (found.conductivity.value, found.material) == (201, "EN AW-6060 T66, heat 4711")
    assert found.handbook is None
    assert said(found, "material") == []


def test_a_conductivity_without_uncertainty_is_exact_and_says_so() -> None:
    (message,) = said(rig(conductivity="388 W/(m K)"), "conductivity")
    assert message == (
        'The conductivity "388 W/(m K)" is stated without an uncertainty: it is taken as exact; state one in '
        '[material], such as "388 W/(m K) +/- 5 %", or "388 W/(m K) +/- 0 %" if it is exact.'
    )
    for stated in ("388 W/(m K) +/- 0 %", "388 W/(m K) +/- 3 %", "(388 ± 4) W/(m K)"):
        assert said(rig(conductivity=stated), "conductivity") == []


def test_without_name_and_number_k_is_free_and_says_so() -> None:
    assert rig().conductivity is None
    assert len(said(rig(), "conductivity")) == 1
    assert said(rig(name="copper"), "conductivity") == []


@pytest.mark.parametrize(
    ("material", "sentence"),
    [
        ({"name": "aluminium 6016-T6"}, '[material] name: "aluminium 6016-T6" is no known material; the '
         'nearest known ones are "aluminium 6061-T6", "aluminium 6063-T6", "aluminium 6063-T5"; or state '
         "conductivity."),
        ({"name": "aluminium"}, '[material] name: "aluminium" is no known material; the nearest known ones '
         'are "aluminium 195 casting", "aluminium 1100", "aluminium 6061-T6"; or state conductivity.'),
        ({"name": 7}, "[material] name: this is no name of a material; write one line of 1 to 80 printable "
         "characters in quotes."),
        ({"name": "copper\x1b[2J"}, "[material] name: this is no name of a material; write one line of 1 to "
         "80 printable characters in quotes."),
        ({"conductivity": "201"}, '[material] conductivity: "201" has no unit; write a conductivity with its '
         'unit, such as "167 W/(m K)".'),
        ({"material": "copper"}, '[material]: the key "material" is unknown; known are conductivity, name, '
         "temperature_coefficient, reference_temperature, emissivity."),
    ],
)  # fmt: skip
def test_a_wrong_material_is_refused_in_a_sentence(material: dict[str, Any], sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        rig(**material)
    assert str(caught.value) == sentence
