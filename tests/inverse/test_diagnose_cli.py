"""`finback diagnose` from outside: what it writes, prints and refuses, and what it finds on bundled rigs."""

import json
import os
import pty
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

import finback
from finback import analysis, cli, datasets, diagnosis, faults
from finback.diagnosis import Diagnosis
from finback.errors import ComputationError
from finback.report import diagnosis_files

INTERVAL = {"median", "low95", "high95", "unit"}


@pytest.fixture
def rig(tmp_path: Path) -> Path:
    """A folder with a rig whose joint is loose."""
    folder = tmp_path / "rig"
    folder.mkdir()
    datasets.copy("bench-pin-loose-joint", folder)
    return folder


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, subprocess.CompletedProcess[str]]:
    """A diagnosis as a user runs it, in a process of its own, its output piped."""
    folder = tmp_path_factory.mktemp("diagnosis")
    datasets.copy("bench-pin-loose-joint", folder)
    command = [sys.executable, "-m", "finback", "diagnose", "rig.toml", "readings.csv", "--out", "out"]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False)
    return folder / "out", done


@pytest.fixture(scope="module")
def written(result: tuple[Path, subprocess.CompletedProcess[str]]) -> dict[str, Any]:
    text = (result[0] / "diagnosis.json").read_text(encoding="utf-8")
    return dict(json.loads(text, parse_constant=pytest.fail))  # NaN and Infinity are no JSON


def run(*arguments: object) -> int:
    return cli.run([str(argument) for argument in arguments])


def refused(capsys: pytest.CaptureFixture[str], *arguments: object) -> str:
    """Run a command line that must be refused and return its sentence, which is all that it may say."""
    assert run(*arguments) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.startswith("finback: ")
    assert captured.err.endswith(".\n")
    assert captured.err.count("\n") == 1
    return captured.err.removeprefix("finback: ").rstrip("\n")


def contents(folder: Path) -> dict[str, bytes]:
    files = (path for path in sorted(folder.rglob("*")) if path.is_file())
    return {str(path.relative_to(folder)): path.read_bytes() for path in files}


# --- what it writes and prints ---------------------------------------------------------------------------


def test_it_writes_its_files_and_prints_its_summary(
    result: tuple[Path, subprocess.CompletedProcess[str]],
) -> None:
    folder, done = result
    assert (done.returncode, done.stderr) == (0, "")
    assert set(contents(folder)) == set(diagnosis_files.OURS)
    assert "The joint between plate and fin is bad" in done.stdout
    assert done.stdout.endswith("Report  out/report.html\n")
    assert "\x1b" not in done.stdout
    assert max(map(len, done.stdout.splitlines())) <= 80
    page = (folder / "report.html").read_text(encoding="utf-8")
    assert "The joint between plate and fin is bad" in page


def test_the_json_has_the_keys_that_programs_rely_on(written: dict[str, Any]) -> None:
    assert {"healthy_probability", "causes", "measurement_faults", "next_measurements"} <= set(written)
    effects = {"heat_recovered": "W", "base_temperature_change": "K"}
    for cause in written["causes"]:
        assert {"code", "probability", "message", *effects} <= set(cause)
        for name, unit in effects.items():
            assert cause[name] is None or (set(cause[name]) == INTERVAL and cause[name]["unit"] == unit)
    for measurement in written["next_measurements"]:
        assert {"what", "expected_gain", "message"} <= set(measurement)
    probabilities = [cause["probability"] for cause in written["causes"]]
    assert probabilities == sorted(probabilities, reverse=True)
    gains = [measurement["expected_gain"] for measurement in written["next_measurements"]]
    assert gains == pytest.approx(sorted(gains, reverse=True), abs=1e-3)


def test_a_loose_joint_is_named_first_with_what_it_costs_in_truth(written: dict[str, Any]) -> None:
    # The truth is the simulator's: the same pin with a healthy joint is bench-pin, beside its own truth.
    truth, healthy = (
        json.loads((datasets.path(name) / "truth.json").read_text(encoding="utf-8"))
        for name in ("bench-pin-loose-joint", "bench-pin")
    )
    assert {name for name in truth if truth[name] != healthy[name]} - {"seed"} == {
        "joint",
        "base_temperature",
        "heat",
    }
    first = written["causes"][0]
    assert (first["code"], first["probability"] > 0.95) == ("joint", True)
    for name, key in (("heat_recovered", "heat"), ("base_temperature_change", "base_temperature")):
        cost = healthy[key]["value"] - truth[key]["value"]
        assert first[name]["low95"] < cost < first[name]["high95"], name
    now = written["costs"][0]
    assert now["what"] == "now"
    assert now["heat"]["low95"] < truth["heat"]["value"] < now["heat"]["high95"]
    assert written["healthy_probability"] < 0.01


def test_the_command_does_what_the_function_does(
    written: dict[str, Any], rig: Path, result: tuple[Path, subprocess.CompletedProcess[str]]
) -> None:
    found = finback.diagnose(rig / "rig.toml", rig / "readings.csv")
    assert isinstance(found, Diagnosis)
    assert json.loads(json.dumps(found.to_dict())) == written
    assert run("diagnose", rig / "rig.toml", rig / "readings.csv", "--out", rig / "out", "--quiet") == 0
    assert contents(rig / "out") == contents(result[0])  # the same bytes in another process


def test_quiet_says_nothing_and_force_replaces_ours_alone(
    rig: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    out = rig / "out"
    out.mkdir()
    for name in ("report.html", "notes.txt"):
        (out / name).write_text("mine", encoding="utf-8")
    arguments = ("diagnose", rig / "rig.toml", rig / "readings.csv", "--out", out, "--quiet")
    assert run(*arguments, "--force", "--seed", 2) == 0
    assert capfd.readouterr() == ("", "")
    after = contents(out)
    assert set(after) == {*diagnosis_files.OURS, "notes.txt"}
    assert after["notes.txt"] == b"mine"
    assert after["report.html"] != b"mine"


def test_progress_shows_on_a_terminal_and_only_on_its_standard_error(rig: Path) -> None:
    ours, theirs = pty.openpty()
    command = [sys.executable, "-m", "finback", "diagnose", "rig.toml", "readings.csv", "--out", "out"]
    environment = {**os.environ, "TERM": "xterm-256color"}
    process = subprocess.Popen(
        command, cwd=rig, stdout=subprocess.PIPE, stderr=theirs, text=True, env=environment
    )
    os.close(theirs)
    shown = b""
    while True:
        try:
            part = os.read(ours, 4096)
        except OSError:  # how Linux says that the other end of a terminal is closed
            break
        if not part:
            break
        shown += part
    out, _ = process.communicate()
    os.close(ours)
    assert process.returncode == 0, shown
    assert b"writing the report" in shown
    assert "\x1b" not in out


# --- what it finds ---------------------------------------------------------------------------------------


def edited(folder: Path, name: str, **changes: str) -> None:
    """Replace a rig's or a table's text, old by new, each of which must be there."""
    path = folder / name
    text = path.read_text(encoding="utf-8")
    for old, new in changes.items():
        assert old in text
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")


def test_a_rig_without_expectations_says_which_lines_to_add(
    rig: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    lines = {
        '[joint]\nexpected = "5e-5 m^2 K/W"\n': 'expected = "5e-5 m^2 K/W +/- 30 %" in [joint]',
        '[air]\nexpected_h = "45 W/(m^2 K) +/- 20 %"\n': 'expected_h = "45 W/(m^2 K) +/- 20 %" in [air]',
        '[material]\nconductivity = "167 W/(m K) +/- 5 %"\n': (
            'conductivity = "167 W/(m K) +/- 5 %" in [material]'
        ),
    }
    edited(rig, "rig.toml", **dict.fromkeys(lines, ""))
    assert run("diagnose", rig / "rig.toml", rig / "readings.csv", "--out", rig / "out") == 0
    found = json.loads((rig / "out" / "diagnosis.json").read_text(encoding="utf-8"))
    for line in lines.values():
        assert sum(line in sentence for sentence in found["missing"]) == 1, line
    assert {"joint", "low-conductivity", "low-convection"}.isdisjoint(
        cause["code"] for cause in found["causes"]
    )
    assert "Add to rig.toml the lines" in " ".join(capsys.readouterr().out.split())
    page = (rig / "out" / "report.html").read_text(encoding="utf-8")
    assert "<code>expected = &#34;5e-5 m^2 K/W +/- 30 %&#34;</code>" in page


def test_the_lines_that_it_asks_for_are_lines_that_a_rig_takes(rig: Path, tmp_path: Path) -> None:
    before = finback.diagnose(rig / "rig.toml", rig / "readings.csv")
    assert before.missing == ()
    text = (rig / "rig.toml").read_text(encoding="utf-8")
    added = text.replace('expected = "5e-5 m^2 K/W"', 'expected = "5e-5 m^2 K/W +/- 30 %"')
    assert added != text
    (tmp_path / "with.toml").write_text(added, encoding="utf-8")
    after = finback.diagnose(tmp_path / "with.toml", rig / "readings.csv")
    assert after.causes[0].code == "joint"
    assert not any("joint" in finding.message for finding in after.findings)  # nothing is assumed of it


def test_a_thermometer_that_is_off_is_found_and_the_fin_is_not_blamed(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    datasets.copy("bench-pin", tmp_path)
    edited(tmp_path, "readings.csv", **{",55.60,": ",60.60,"})
    assert run("diagnose", tmp_path / "rig.toml", tmp_path / "readings.csv", "--out", tmp_path / "out") == 0
    found = json.loads((tmp_path / "out" / "diagnosis.json").read_text(encoding="utf-8"))
    assert (found["causes"][0]["code"], found["causes"][0]["sensor"]) == ("sensor-outlier", "T4")
    assert [fault["sensor"] for fault in found["measurement_faults"]] == ["T4"]
    assert found["fin_healthy_probability"] > 0.8
    out = " ".join(capsys.readouterr().out.split())
    assert "The thermometer T4 reads wrong" in out
    assert "The fin itself seems healthy" in out


def test_swapped_thermometers_are_found_in_the_run_that_is_asked_for(tmp_path: Path) -> None:
    datasets.copy("bench-pin", tmp_path)
    table = tmp_path / "readings.csv"
    header, good = table.read_text(encoding="utf-8").splitlines()
    swapped = good.replace("bench,", "swapped,").replace("65.55,60.03", "60.03,65.55")
    assert swapped.count("60.03,65.55") == 1
    table.write_text("\n".join([header, good, swapped]), encoding="utf-8")
    arguments = ("diagnose", tmp_path / "rig.toml", table, "--out", tmp_path / "out", "--quiet")
    assert run(*arguments, "--run", "swapped") == 0
    found = json.loads((tmp_path / "out" / "diagnosis.json").read_text(encoding="utf-8"))
    assert found["run"] == "swapped"
    assert found["causes"][0]["code"] == "sensor-swap"
    (fault,) = found["measurement_faults"]
    assert (fault["code"], "T2 and T3 are swapped" in fault["message"]) == ("sensor-swap", True)
    assert found["fin_healthy_probability"] > 0.8


@pytest.mark.parametrize("as_read", [True, False])
def test_fit_takes_wrong_readings_as_they_stand_where_that_is_asked_for(
    rig: Path, monkeypatch: pytest.MonkeyPatch, as_read: bool
) -> None:
    asked = []

    def fit(*_: object, **options: object) -> None:
        asked.append(options["as_read"])
        raise ComputationError("enough is seen.")

    monkeypatch.setattr(analysis, "fit", fit)
    arguments = ("fit", rig / "rig.toml", rig / "readings.csv", "--out", rig / "out")
    assert run(*arguments, *["--as-read"] * as_read) == 1
    assert asked == [as_read]


def test_a_fit_as_read_says_what_is_wrong_and_counts_it_all_the_same(tmp_path: Path) -> None:
    datasets.copy("aluminium-rod", tmp_path)
    table = finback.read_readings(tmp_path / "readings.csv", finback.read_rig(tmp_path / "rig.toml"))
    readings = table.pick(None)
    name = next(name for name in readings.values if name.startswith("T"))
    wrong = replace(readings, values={**readings.values, name: readings.values[name] + 10})
    found = faults.search(finback.read_rig(tmp_path / "rig.toml"), wrong, aside=False)
    assert found.readings is wrong
    assert [(each.code, each.sensor) for each in found.findings if each.severity == "fault"] == [
        ("sensor-outlier", name)
    ]
    assert "set aside" not in found.findings[0].message


# --- what it refuses -------------------------------------------------------------------------------------


def test_a_missing_file(rig: Path, capsys: pytest.CaptureFixture[str]) -> None:
    sentence = refused(capsys, "diagnose", rig / "rg.toml", rig / "readings.csv", "--out", rig / "x")
    assert sentence == f"{rig / 'rg.toml'}: there is no such file; check its name and folder."
    sentence = refused(capsys, "diagnose", rig / "rig.toml", rig / "reading.csv", "--out", rig / "x")
    assert sentence == f"{rig / 'reading.csv'}: there is no such file; check its name and folder."
    assert not (rig / "x").exists()


def test_an_unknown_run(rig: Path, capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ("diagnose", rig / "rig.toml", rig / "readings.csv", "--out", rig / "x", "--run", "bensh")
    assert refused(capsys, *arguments) == (
        f'{rig / "readings.csv"}: there is no run "bensh"; the nearest is "bench".'
    )
    assert not (rig / "x").exists()


def test_a_folder_that_is_taken(rig: Path, capsys: pytest.CaptureFixture[str]) -> None:
    out = rig / "out"
    out.mkdir()
    (out / "diagnosis.json").write_text("mine", encoding="utf-8")
    arguments = ("diagnose", rig / "rig.toml", rig / "readings.csv", "--out", out)
    assert refused(capsys, *arguments) == (
        f"{out}: already holds an earlier result (diagnosis.json); choose another folder, or overwrite with "
        "--force."
    )
    assert contents(out) == {"diagnosis.json": b"mine"}


def test_the_folder_is_tried_before_anything_is_computed(
    rig: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(diagnosis, "diagnose", lambda *_, **__: pytest.fail("computed"))
    out = rig / "rig.toml" / "out"
    sentence = refused(capsys, "diagnose", rig / "rig.toml", rig / "readings.csv", "--out", out)
    assert sentence == f"{out}: cannot be written to (Not a directory); give a folder that can be written."


def test_a_computation_that_fails_is_one_sentence_and_writes_nothing(
    rig: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object, **__: object) -> Diagnosis:
        raise ComputationError("no start was found.")

    monkeypatch.setattr(diagnosis, "diagnose", fail)
    assert run("diagnose", rig / "rig.toml", rig / "readings.csv", "--out", rig / "out") == 1
    assert capsys.readouterr() == ("", "finback: no start was found.\n")
    assert contents(rig / "out") == {}


@pytest.mark.parametrize(
    ("arguments", "start"),
    [
        ("diagnose", "Missing argument 'RIG'"),
        ("diagnose rig.toml readings.csv", "Missing option '--out'"),
        ("diagnose rig.toml readings.csv --out x --seed -1", "Invalid value for '--seed'"),
    ],
)
def test_a_command_line_that_cannot_be_read_is_one_sentence(
    capsys: pytest.CaptureFixture[str], arguments: str, start: str
) -> None:
    assert refused(capsys, *arguments.split()).startswith(start)
