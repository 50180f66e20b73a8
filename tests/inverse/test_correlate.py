"""`finback correlate`: tables that people have, the forms, published laws, implied speeds, files and
refusals."""

import json
import math
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest

from finback import cli, rig
from finback.correlate import Correlation, correlate
from finback.errors import InputError
from finback.models.air import air
from finback.models.expected import expected_coefficient, implied_air_speed
from finback.models.exposure import ExposedPin
from finback.models.laws import Stream
from finback.quantity import Quantity
from finback.report import correlation
from finback.rig import Rig
from finback.run_points import Stated, parse, parse_form

STATED = Stated(speed_sd=Quantity(0.05))
T_AIR, T_FIN = 295.0, 325.0
RIG = """\
title = "Invented pin in a stream"
[fin]
profile = "pin"
length = "90 mm"
diameter = "8 mm +/- 0.04 mm"
[air]
speed = "3 m/s"
[sensors]
T1 = { at = "10 mm" }
T2 = { at = "80 mm" }
TA = { on = "air" }
"""


def rig_of(**changes: dict[str, str]) -> Rig:
    """Return the rig, its sections with other keys."""
    sections: dict[str, object] = {
        "title": "Invented pin",
        "fin": {"profile": "pin", "length": "90 mm", "diameter": "8 mm"} | changes.get("fin", {}),
        "air": changes.get("air", {}),
        "material": changes.get("material", {}),
        "sensors": {"T1": {"at": "10 mm"}, "TA": {"on": "air"}},
    }
    return Rig.from_dict(sections)


def hilpert_runs(runs: int = 24, seed: int = 1) -> tuple[np.ndarray, np.ndarray]:
    """Return speeds [m/s] and h [W/(m² K)] of a pin of 8 mm by Hilpert's law, scattered by 3 %."""
    random = np.random.default_rng([30, seed])
    beside = air((T_AIR + T_FIN) / 2)
    reynolds = np.geomspace(60, 3500, runs)
    h = 0.683 * reynolds**0.466 * float(beside.prandtl) ** (1 / 3) * float(beside.conductivity) / 0.008
    h *= np.exp(0.03 * random.standard_normal(runs))
    return reynolds * float(beside.kinematic_viscosity) / 0.008, h


def rows(runs: int = 24) -> list[dict[str, object]]:
    """Return rows of a table of results as a batch writes it."""
    return [
        {
            "run": f'run {i}, "cold"',
            "status": "ok",
            "h_median": f"{h:.5g}",
            "h_sd": f"{0.03 * h:.4g}",
            "h_low95": f"{h * math.exp(-0.0588):.6g}",
            "h_high95": f"{h * math.exp(0.0588):.6g}",
            "air_median": f"{T_AIR - 273.15:.2f}",
            "base_temperature_median": f"{T_AIR - 273.15 + 50:.2f}",
            "efficiency_median": "0.6",
            "best_candidate": "convective tip, joint",
            "findings": "assumed;misfit",
            "speed [m/s]": f"{speed:.6g}",
            "date": "2026-11-30",
        }
        for i, (speed, h) in enumerate(zip(*hilpert_runs(runs), strict=True))
    ]


def write(path: Path, table: list[dict[str, object]]) -> Path:
    pd.DataFrame(table).to_csv(path, index=False)
    return path


@pytest.fixture
def table(tmp_path: Path) -> Path:
    return write(tmp_path / "results.csv", rows())


@pytest.fixture
def rig_file(tmp_path: Path) -> Path:
    path = tmp_path / "rig.toml"
    path.write_text(RIG, encoding="utf-8")
    return path


def near(found: Correlation, name: str, true: float) -> bool:
    """Tell whether a constant lies within four standard deviations of the truth."""
    constant = found.constants[name]
    return abs(constant.mean - true) < 4 * constant.sd


def test_the_results_of_a_batch_give_hilperts_law(table: Path) -> None:
    found = correlate(table, rig_of(), stated=STATED)
    assert found.form == "reynolds"
    assert near(found, "C", 0.683)
    assert near(found, "n", 0.466)
    assert found.constants["n"].sd < 0.02
    assert found.runs[0] == 'run 0, "cold"'
    assert found.x[[0, -1]] == pytest.approx([60, 3500], rel=1e-3)


def test_runs_that_failed_or_lack_a_number_are_left_out_and_counted(tmp_path: Path) -> None:
    spoilt = rows()
    spoilt[2] |= {"status": "failed"}
    spoilt[5] |= {"h_median": "", "h_sd": "", "h_low95": "", "h_high95": ""}
    spoilt[7] |= {"speed [m/s]": "n/a"}
    spoilt[8] |= {"speed [m/s]": "broken"}
    spoilt[9] |= {"air_median": ""}
    spoilt[10] |= {"base_temperature_median": ""}
    found = correlate(write(tmp_path / "results.csv", spoilt), rig_of(), stated=STATED)
    assert found.left_out == {
        "the run failed": 1,
        "no h": 1,
        "no speed": 2,
        "no temperature of the air or the fin": 2,
    }
    assert len(found.runs) == 18
    clean = [row for i, row in enumerate(rows()) if i not in (2, 5, 7, 8, 9, 10)]
    same = correlate(write(tmp_path / "clean.csv", clean), rig_of(), stated=STATED)
    assert same.constants == found.constants


def test_of_several_rigs_the_runs_of_the_one_given_are_taken(tmp_path: Path, table: Path) -> None:
    strange = [
        row | {"run": f"other {i}", "h_median": "90", "rig": "Another"} for i, row in enumerate(rows())
    ]
    both = [row | {"rig": "Invented pin"} for row in rows()] + strange
    path = write(tmp_path / "both.csv", both)
    found = correlate(path, rig_of(), stated=STATED)
    assert found.left_out == {"of another rig": 24}
    assert found.constants == correlate(table, rig_of(), stated=STATED).constants
    told = [finding.message for finding in correlate(path, stated=STATED).findings]
    assert any("of 2 rigs" in message for message in told)


def test_a_table_by_hand_with_other_units_says_the_same(tmp_path: Path) -> None:
    speed, h = hilpert_runs()
    straight = tmp_path / "si.csv"
    straight.write_text(
        "h,h_sd,speed,speed_sd\n"
        + "".join(f"{b:.9g},{0.03 * b:.9g},{a:.9g},{0.05 * a:.9g}\n" for a, b in zip(speed, h, strict=True)),
        encoding="utf-8",
    )
    other = tmp_path / "other.csv"  # semicolons, decimal commas, a row of units, latin letters of Windows
    lines = ["run;h;h_sd;Geschw. ähnlich;Geschw. ähnlich_sd", ";[BTU/(h ft^2 degF)];%;ft/s;%"]
    lines += [
        f"{i};{b / 5.678263341:.9g};3;{a / 0.3048:.9g};5".replace(".", ",")
        for i, (a, b) in enumerate(zip(speed, h, strict=True))
    ]
    other.write_bytes("\r\n".join(lines).encode("cp1252"))
    one = correlate(straight)
    two = correlate(other, stated=Stated(speed="Geschw. ähnlich"))
    assert one.form == two.form == "speed"
    for mine, theirs in ((one.x, two.x), (one.y, two.y), (one.x_sd, two.x_sd), (one.y_sd, two.y_sd)):
        assert theirs == pytest.approx(mine, rel=1e-6)  # Btu are of 1055.056 or of 1055.05585 J
    for name, constant in one.constants.items():  # drawn, so that rounding moves them a little
        assert abs(two.constants[name].mean - constant.mean) < 0.05 * constant.sd


def test_workbook_and_parquet_say_what_the_csv_file_says(tmp_path: Path, table: Path) -> None:
    book = openpyxl.Workbook()
    sheet = book.active
    frame = pd.read_csv(table)
    assert sheet is not None
    sheet.append(list(frame.columns))
    for row in frame.itertuples(index=False):
        sheet.append(list(row))
    book.save(tmp_path / "results.xlsx")
    frame.to_parquet(tmp_path / "results.parquet")
    expected = correlate(table, rig_of(), stated=STATED)
    for name in ("results.xlsx", "results.parquet"):
        found = correlate(tmp_path / name, rig_of(), stated=STATED)
        assert found.runs == expected.runs
        assert found.constants == expected.constants


def test_a_column_may_be_named_with_its_unit_or_with_brackets_of_its_own(tmp_path: Path) -> None:
    base = correlate(write(tmp_path / "si.csv", rows()), rig_of(), stated=STATED)
    feet = [
        {k: v for k, v in row.items() if k != "speed [m/s]"}
        | {"U (hot wire)": row["speed [m/s]"], "U [ft/s]": float(str(row["speed [m/s]"])) / 0.3048, "nu": 9.9}
        for row in rows()
    ]
    path = write(tmp_path / "feet.csv", feet)
    with pytest.raises(InputError, match='there are 2 columns "U"'):
        correlate(path, rig_of(), stated=replace(STATED, speed="U"))
    for column in ("U (hot wire)", "U [ft/s]"):
        found = correlate(path, rig_of(), stated=replace(STATED, speed=column))
        assert found.form == "reynolds"
        assert found.x == pytest.approx(base.x, rel=1e-5)


def test_two_hundred_columns_change_nothing(tmp_path: Path, table: Path) -> None:
    wide = [row | {f"note {i}": 'x, "y"' for i in range(200)} for row in rows()]
    found = correlate(write(tmp_path / "wide.csv", wide), rig_of(), stated=STATED)
    assert found.constants == correlate(table, rig_of(), stated=STATED).constants


def test_columns_of_groups_need_no_rig(tmp_path: Path) -> None:
    random = np.random.default_rng([31])
    reynolds = np.geomspace(50, 4000, 30)
    nusselt = 0.683 * reynolds**0.466 * 0.7 ** (1 / 3) * np.exp(0.03 * random.standard_normal(30))
    path = tmp_path / "groups.csv"
    frame = pd.DataFrame({"Re": reynolds, "Nu": nusselt, "Pr": 0.7, "Re_sd [%]": 2, "Nu_sd": 0.02 * nusselt})
    frame.to_csv(path, index=False)
    found = correlate(path)
    assert found.form == "reynolds"
    assert near(found, "C", 0.683)
    assert near(found, "n", 0.466)
    assert found.x_sd / found.x == pytest.approx(0.02)
    assert found.y_sd / found.y == pytest.approx(0.02)
    assert found.not_compared is not None
    frame.drop(columns="Pr").to_csv(path, index=False)
    assert any("0.707" in finding.message for finding in correlate(path).findings)


def test_free_convection_gives_its_law_over_ra(tmp_path: Path) -> None:
    """Nu = 0.48 Ra^(1/4) of a level cylinder, V. T. Morgan, Adv. Heat Transfer 11 (1975) 199, from 1e4 to
    1e7."""
    random = np.random.default_rng([32])
    excess = np.geomspace(8, 90, 25)
    lines = ["run,h,h_sd,air,surface_temperature,base_temperature_sd,air_sd"]
    for i, theta in enumerate(excess):
        beside = air(T_AIR + theta / 2)
        nu, alpha = float(beside.kinematic_viscosity), float(beside.diffusivity)
        rayleigh = 9.80665 * float(beside.expansion) * theta * 0.03**3 / (nu * alpha)
        h = 0.48 * rayleigh**0.25 * float(beside.conductivity) / 0.03 * math.exp(0.02 * random.normal())
        lines.append(f"{i},{h:.6g},{0.02 * h:.6g},{T_AIR - 273.15},{T_AIR - 273.15 + theta:.6g},0.2,0.2")
    path = tmp_path / "free.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    still = rig_of(fin={"diameter": "30 mm"}, material={"emissivity": "0.05 +/- 0.01"})
    found = correlate(path, still)
    assert found.form == "rayleigh"
    assert near(found, "C", 0.48)
    assert near(found, "n", 0.25)
    morgan = next(one for one in found.compared if one.correlation == "morgan_cylinder")
    assert morgan.ratio == pytest.approx(1.0, abs=0.03)
    assert morgan.low95 < 1 < morgan.high95
    assert not any("radiates" in finding.message for finding in found.findings)
    blackened = replace(still, emissivity=None)
    assert any("radiates" in finding.message for finding in correlate(path, blackened).findings)


def test_published_laws_are_those_of_the_models(table: Path) -> None:
    found = correlate(table, rig_of(), stated=STATED)
    assert {one.correlation for one in found.compared} == {
        "hilpert",
        "churchill_bernstein",
        "zukauskas_cylinder",
    }
    nu = float(air((T_AIR + T_FIN) / 2).kinematic_viscosity)
    to_y = 0.008 / float(air((T_AIR + T_FIN) / 2).conductivity)
    to_y /= float(air((T_AIR + T_FIN) / 2).prandtl) ** (1 / 3)
    for one in found.compared:
        for reynolds, value in zip(found.curve_x, found.curves[one.correlation], strict=True):
            stream = Stream(T_AIR, speed=float(reynolds) * nu / 0.008)
            expected = expected_coefficient(ExposedPin(0.09, 0.008), stream, T_FIN, one.correlation)
            assert value == pytest.approx(expected.coefficient * to_y, rel=1e-9)
    hilpert = next(one for one in found.compared if one.correlation == "hilpert")
    assert hilpert.scatter == 0.15
    assert hilpert.ratio == pytest.approx(1.0, abs=0.03)
    assert hilpert.scatters == pytest.approx((hilpert.ratio - 1) / 0.15)


def test_a_law_whose_range_does_not_hold_the_data_is_named_and_not_compared(tmp_path: Path) -> None:
    slow = [row | {"speed [m/s]": f"{float(str(row['speed [m/s]'])) / 200:.6g}"} for row in rows()]
    found = correlate(write(tmp_path / "slow.csv", slow), rig_of(), stated=STATED)
    out = {one.correlation: one.reason for one in found.out_of_range}
    assert "zukauskas_cylinder" in out  # from Re = 1 up
    assert "Re from 1 to" in out["zukauskas_cylinder"]
    assert "zukauskas_cylinder" not in {one.correlation for one in found.compared}


@pytest.mark.parametrize("law", ["churchill_bernstein", "hilpert", "zukauskas_cylinder"])
def test_implied_speeds_are_those_of_the_models(tmp_path: Path, law: str) -> None:
    warmer = [row | {"base_temperature_median": f"{60 + i:.2f}"} for i, row in enumerate(rows())]
    blown = rig_of(air={"speed": "3 m/s", "correlation": law})
    found = correlate(write(tmp_path / "warmer.csv", warmer), blown, stated=STATED)
    assert found.implied is not None
    assert found.implied.correlation == law
    for i in (0, 7, 15, 23):
        surface = T_AIR + 0.6 * (60 + i + 273.15 - T_AIR)
        h = float(str(warmer[i]["h_median"]))
        expected = implied_air_speed(h, ExposedPin(0.09, 0.008), Stream(T_AIR), surface, law, 0.03 * h)
        assert expected.speed is not None
        assert expected.standard_uncertainty is not None
        assert found.implied.speed[i] == pytest.approx(expected.speed, rel=0.01)
        assert found.implied.sd[i] == pytest.approx(expected.standard_uncertainty, rel=0.03)


def test_errors_that_all_runs_share_widen_c_and_leave_n(table: Path) -> None:
    alone = correlate(table, rig_of(), stated=STATED)
    shared = correlate(
        table, rig_of(), stated=Stated(speed_sd=Quantity(0.05), shared_h=0.02, shared_speed=0.03)
    )
    own = correlate(table, rig_of(), stated=Stated(speed_sd=Quantity(0.04)))
    c, n = own.constants["C"], own.constants["n"]
    assert shared.x_sd / shared.x == pytest.approx(0.04)  # 0.05² - 0.03²
    assert shared.y_sd / shared.y == pytest.approx(math.sqrt(0.03**2 - 0.02**2), rel=0.01)
    assert shared.constants["n"].sd == pytest.approx(n.sd, rel=0.2)
    added = math.hypot(0.02, 0.466 * 0.03)
    assert shared.constants["C"].sd / 0.683 == pytest.approx(math.hypot(c.sd / 0.683, added), rel=0.1)
    assert "--shared-h" in " ".join(finding.message for finding in alone.findings)
    assert "--shared-h" not in " ".join(finding.message for finding in shared.findings)


def test_the_uncertainty_of_the_diameter_is_one_that_all_runs_share(table: Path) -> None:
    exact = correlate(table, rig_of(), stated=STATED)
    rough = correlate(table, rig_of(fin={"diameter": "8 mm +/- 0.8 mm"}), stated=STATED)
    assert rough.shared["length"] == pytest.approx(0.1, rel=0.02)
    expected = math.hypot(exact.constants["C"].sd / 0.683, 0.1 * (1 - 0.466))
    assert rough.constants["C"].sd / 0.683 == pytest.approx(expected, rel=0.1)


def test_a_speed_without_uncertainty_is_said_to_be_exact(table: Path) -> None:
    found = correlate(table, rig_of())
    assert found.status == "caution"
    assert any("taken as exact" in finding.message for finding in found.findings)


def test_errors_too_large_for_the_scatter_are_said_to_be_shared(tmp_path: Path) -> None:
    loud = [
        {**row, "h_sd": 0.3 * float(str(row["h_median"])), "h_low95": "", "h_high95": ""} for row in rows()
    ]
    found = correlate(write(tmp_path / "loud.csv", loud), rig_of(), stated=STATED)
    assert any("shared by all runs" in finding.message for finding in found.findings)


def test_an_outlying_run_is_named_in_the_result(tmp_path: Path) -> None:
    spoilt = rows()
    for key in ("h_median", "h_low95", "h_high95"):
        spoilt[6] |= {key: 1.6 * float(str(spoilt[6][key]))}
    found = correlate(write(tmp_path / "results.csv", spoilt), rig_of(), stated=STATED)
    assert found.n_outliers == 1
    assert found.outliers[0].run == 'run 6, "cold"'
    assert found.outliers[0].ratio == pytest.approx(1.6, rel=0.1)
    assert near(found, "n", 0.466)


@pytest.mark.parametrize(
    ("change", "arguments", "sentence"),
    [
        ({}, {"speed": "spead"}, 'there is no column "spead"; rename the nearest column, "speed"'),
        ({"h_median": None, "h_low95": None, "h_high95": None}, {}, 'there is no column "h"'),
        ({"air_median": None}, {}, "no column tells the temperature of the air; add it"),
        ({"speed [m/s]": "2"}, {}, "all 24 runs have the same speed; give runs that differ in it"),
        ({"status": "failed"}, {}, r"0 of 24 runs can be used \(24 left out: the run failed\)"),
    ],
)
def test_what_is_wrong_with_a_table_is_one_sentence(
    tmp_path: Path, change: dict[str, str | None], arguments: dict[str, str], sentence: str
) -> None:
    changed = [{k: v for k, v in (row | change).items() if v is not None} for row in rows()]
    path = write(tmp_path / "results.csv", changed)
    with pytest.raises(InputError, match=sentence) as caught:
        correlate(path, rig_of(), form="reynolds", stated=Stated(**arguments))
    assert str(caught.value).startswith(f"{path}")


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        (b"", "this file is empty"),
        (b"run,h,speed\n", "there is no run below the header"),
        (b"\x00\x01\x02", "this is not a text file"),
        (b"PK\x03\x04 nothing", "this is not a readable XLSX workbook"),
        (b"PAR1 nothing", "this is not a readable Parquet file"),
        (b"h,h,speed\n1,2,3\n", 'there are 2 columns "h"'),
        (b"h [K],speed\n1,2\n", 'column h \\[K\\]: the unit "K" is not that of a heat transfer coefficient'),
        (b"h,speed\n1,2\n3,4,\n3,4,5\n", "line 4: 3 cells, and the header has 2; write as many"),
        (b'h,speed\n1,2\n3,"4\n', "line 3: this row cannot be split into cells"),
    ],
)
def test_what_is_no_table_is_one_sentence(tmp_path: Path, content: bytes, sentence: str) -> None:
    path = tmp_path / "results.csv"
    path.write_bytes(content)
    with pytest.raises(InputError, match=sentence):
        correlate(path)


def test_the_options_are_read_as_an_engineer_writes_them() -> None:
    stated = parse("U", "0.1 m/s", "3 %", "2%")
    assert stated.speed_sd is not None
    assert (stated.speed, stated.speed_sd.value, stated.speed_sd_relative) == ("U", 0.1, False)
    assert (stated.shared_h, stated.shared_speed) == pytest.approx((0.03, 0.02))
    assert parse(None, "5 %", None, None).speed_sd_relative
    assert parse_form("Rayleigh") == "rayleigh"
    for bad in ("5", "-5 %", "200 %", "5 kg"):
        with pytest.raises(InputError, match="--speed-uncertainty"):
            parse(None, bad, None, None)
    with pytest.raises(InputError, match="--form: there is no form"):
        parse_form("nusselt")


def test_the_command_writes_what_the_readme_says(
    tmp_path: Path, table: Path, rig_file: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "result"
    asked = ["correlate", str(table), "--rig", str(rig_file), "--speed-uncertainty", "5 %", "--out", str(out)]
    assert cli.run(asked) == 0
    told = capsys.readouterr().out
    assert "Hilpert, cylinder in cross flow" in told
    assert max(map(len, told.splitlines()[:-1])) <= 79
    assert {path.name for path in out.iterdir()} == {
        "correlation.json",
        "correlation.html",
        "correlation_runs.csv",
        "figures",
    }
    first = {path: path.read_bytes() for path in sorted(out.rglob("*.*"))}
    document = json.loads(first[out / "correlation.json"])
    assert document["form"] == "reynolds"
    assert document["n_runs"] == 24
    assert set(document["parameters"]) == {"C", "n"}
    assert document["parameters"]["n"]["low95"] < 0.466 < document["parameters"]["n"]["high95"]
    assert len(document["band"]["x"]) == len(document["band"]["new_high95"])
    runs = pd.read_csv(out / "correlation_runs.csv")
    assert list(runs["run"]) == [row["run"] for row in rows()]
    assert runs["implied_speed [m/s]"].notna().all()
    page = first[out / "correlation.html"].decode()
    assert "<script" not in page
    assert not re.search(r'(?:src|href)="(?!data:|#)', page)
    assert cli.run(asked) == 2
    assert "already holds an earlier result" in capsys.readouterr().err
    assert cli.run([*asked, "--force", "--quiet"]) == 0
    assert capsys.readouterr().out == ""
    assert {path: path.read_bytes() for path in sorted(out.rglob("*.*"))} == first


def test_names_and_titles_are_escaped_and_harmless(tmp_path: Path) -> None:
    odd = [row | {"run": f"<b>{i}</b> \u202e $x$"} for i, row in enumerate(rows())]
    for key in ("h_median", "h_low95", "h_high95"):
        odd[6] |= {key: 2.5 * float(str(odd[6][key]))}
    path = write(tmp_path / "odd.csv", odd)
    out = tmp_path / "result"
    assert cli.run(["correlate", str(path), "--out", str(out), "--quiet"]) == 0
    page = (out / "correlation.html").read_text(encoding="utf-8")
    assert "<b>6" not in page
    assert "&lt;b&gt;6" in page
    assert "\u202e" not in correlation.summary(correlate(path))


def test_many_runs_are_drawn_without_bars_and_few_laws_in_range_without_lines(tmp_path: Path) -> None:
    many = rows(400)
    many[9] |= {"h_median": "400", "h_low95": "380", "h_high95": "420"}
    out = tmp_path / "result"
    path = write(tmp_path / "many.csv", many)
    assert cli.run(["correlate", str(path), "--speed-uncertainty", "5 %", "--out", str(out), "--quiet"]) == 0
    image = (out / "figures" / "correlation.png").read_bytes()
    assert image.startswith(b"\x89PNG")
    document = json.loads((out / "correlation.json").read_text(encoding="utf-8"))
    assert [one["run"] for one in document["outliers"]] == ['run 9, "cold"']
    assert document["published"]["compared"] == []
    assert "no rig tells" in document["published"]["not_compared"]


@pytest.mark.slow
def test_a_million_runs_are_correlated_in_little_memory(tmp_path: Path) -> None:
    import subprocess
    import sys

    random = np.random.default_rng([33])
    runs = 1_000_000
    reynolds = 40 * 100 ** random.random(runs)
    speed = reynolds * 1.6e-5 / 0.008 * np.exp(0.1 * random.standard_normal(runs))
    h = 0.6 * reynolds**0.466 * 0.026 / 0.008 * np.exp(0.05 * random.standard_normal(runs))
    path = tmp_path / "results.csv"
    frame = pd.DataFrame({"run": np.arange(runs), "h_median": h, "h_sd": 0.04 * h, "speed": speed})
    frame = frame.assign(air_median=22.0, surface_temperature=40.0, note="x" * 20)
    frame.to_csv(path, index=False, float_format="%.6g")
    rig_path = tmp_path / "rig.toml"
    rig_path.write_text(RIG, encoding="utf-8")
    script = (
        "import resource, sys; from finback import cli\n"
        f"status = cli.run(['correlate', {str(path)!r}, '--rig', {str(rig_path)!r}, '--quiet', "
        f"'--speed-uncertainty', '10 %', '--out', {str(tmp_path / 'out')!r}])\n"
        "print(status, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)"
    )
    told = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True).stdout
    status, kilobytes = map(int, told.split())
    assert status == 0
    assert kilobytes < 1_200_000
    assert rig.read(rig_path).length == pytest.approx(0.09)
    document = json.loads((tmp_path / "out" / "correlation.json").read_text(encoding="utf-8"))
    assert document["parameters"]["n"]["median"] == pytest.approx(0.466, abs=0.001)
