"""The command line: what it prints where, its exit statuses, and one sentence for whatever is wrong."""

import json
import os
import pty
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

import finback
from finback import cli, datasets

OURS = {"estimate.json", "report.html", "posterior.nc", "figures"}


@pytest.fixture
def rod(tmp_path: Path) -> Path:
    """A folder with the files of the quickest rig."""
    folder = tmp_path / "rod"
    folder.mkdir()
    datasets.copy("aluminium-rod", folder)
    return folder


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, subprocess.CompletedProcess[str]]:
    """A demo as a user runs it, in a process of its own, its output piped."""
    folder = tmp_path_factory.mktemp("demo")
    command = [sys.executable, "-m", "finback", "demo", "pin", "--seed", "3"]
    done = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False)
    return folder / "pin", done


def refused(capsys: pytest.CaptureFixture[str], *arguments: object) -> str:
    """Run a command line that must be refused and return its sentence, which is all that it may say."""
    assert cli.run([str(argument) for argument in arguments]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.startswith("finback: ")
    assert captured.err.endswith(".\n")
    assert captured.err.count("\n") == 1
    return captured.err.removeprefix("finback: ").rstrip("\n")


def contents(folder: Path) -> dict[str, bytes]:
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


# --- what a good run does --------------------------------------------------------------------------------


def test_a_demo_writes_the_rig_and_its_result(result: tuple[Path, subprocess.CompletedProcess[str]]) -> None:
    folder, done = result
    assert done.returncode == 0, done.stderr
    assert OURS | set(datasets.file_names("bench-pin")) == {path.name for path in folder.iterdir()}
    assert json.loads((folder / "estimate.json").read_text(encoding="utf-8"))["sampler"]["seed"] == 3


def test_a_piped_run_says_nothing_but_its_summary(
    result: tuple[Path, subprocess.CompletedProcess[str]],
) -> None:
    _, done = result
    assert done.stderr == ""
    assert "\x1b" not in done.stdout
    assert "\r" not in done.stdout
    assert "report.html" in done.stdout
    assert max(map(len, done.stdout.splitlines())) <= 80


def test_fit_does_what_finback_fit_does_in_python(rod: Path) -> None:
    rig_file, readings_file, out = rod / "rig.toml", rod / "readings.csv", rod / "result"
    assert (
        cli.run(["fit", str(rig_file), str(readings_file), "--out", str(out), "--seed", "7", "--quiet"]) == 0
    )
    written = json.loads((out / "estimate.json").read_text(encoding="utf-8"))
    estimate = finback.fit(rig_file, readings_file, seed=7)
    # estimate.json is rounded to ten digits; another seed differs in the fifth
    assert written["parameters"]["h"]["median"] == pytest.approx(estimate.parameters["h"].median, rel=1e-9)


def test_the_same_seed_gives_the_same_bytes(
    result: tuple[Path, subprocess.CompletedProcess[str]], tmp_path: Path
) -> None:
    # In another process and another folder; that another seed gives others, the test of --force shows.
    command = [sys.executable, "-m", "finback", "demo", "again", "--seed", "3", "--quiet"]
    subprocess.run(command, cwd=tmp_path, check=True)
    again = (tmp_path / "again" / "estimate.json").read_bytes()
    assert again == (result[0] / "estimate.json").read_bytes()


def test_quiet_says_nothing(rod: Path, capfd: pytest.CaptureFixture[str]) -> None:
    arguments = ["fit", rod / "rig.toml", rod / "readings.csv", "--out", rod / "result", "--quiet"]
    assert cli.run([str(argument) for argument in arguments]) == 0
    assert capfd.readouterr() == ("", "")


def test_progress_shows_on_a_terminal_and_only_on_its_standard_error(rod: Path) -> None:
    ours, theirs = pty.openpty()
    command = [sys.executable, "-m", "finback", "fit", "rig.toml", "readings.csv", "--out", "result"]
    environment = {**os.environ, "TERM": "xterm-256color"}
    process = subprocess.Popen(
        command, cwd=rod, stdout=subprocess.PIPE, stderr=theirs, text=True, env=environment
    )
    os.close(theirs)
    shown = b"".join(iter(lambda: read_terminal(ours), b"")).decode()
    out, _ = process.communicate()
    os.close(ours)
    assert process.returncode == 0, shown
    assert "%" in shown
    assert "\x1b" not in out
    assert "report.html" in out


def read_terminal(handle: int) -> bytes:
    """Return what a terminal shows next, nothing once the program behind it has ended."""
    try:
        return os.read(handle, 4096)
    except OSError:  # how Linux says that the other end of a terminal is closed
        return b""


def test_check_shows_what_was_understood_and_writes_nothing(
    rod: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    before = contents(rod)
    assert cli.run(["check", str(rod / "rig.toml"), str(rod / "readings.csv")]) == 0
    shown = capsys.readouterr().out
    assert "237 W/(m K)" in shown
    assert "convective tip" in shown
    assert "joint  cannot be told: no sensor reads the plate" in shown
    assert "1 run: published" in shown
    assert max(map(len, shown.splitlines())) <= 80
    assert contents(rod) == before


def test_check_does_without_readings(rod: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.run(["check", str(rod / "rig.toml")]) == 0
    assert "run" not in capsys.readouterr().out.split("Candidates")[1]


def test_the_list_of_rigs_names_them_all_and_writes_nothing(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    assert cli.run(["demo", "--list"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert [line.split()[0] for line in lines] == list(datasets.names())
    assert max(map(len, lines)) <= 80
    assert list(tmp_path.iterdir()) == []


def test_the_version(capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.run(["--version"]) == 0
    assert capsys.readouterr().out == f"finback {finback.__version__}\n"


def test_no_command_at_all_shows_the_help(capsys: pytest.CaptureFixture[str]) -> None:
    assert cli.run([]) == 0
    assert "demo" in capsys.readouterr().out


def test_the_installed_command_is_the_same() -> None:
    command = Path(sys.executable).with_name("finback")
    done = subprocess.run([command, "--version"], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout) == (0, f"finback {finback.__version__}\n")


# --- wrong command lines ---------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("arguments", "start"),
    [
        ("fit", "Missing argument 'RIG'"),
        ("fit rig.toml", "Missing argument 'READINGS'"),
        ("fit rig.toml readings.csv", "Missing option '--out'"),
        ("fit rig.toml readings.csv --out x --seed one", "Invalid value for '--seed'"),
        ("fit rig.toml readings.csv --out x --seed -1", "Invalid value for '--seed'"),
        ("fit rig.toml readings.csv --outt x", "No such option"),
        ("nonsense", "No such command 'nonsense'"),
        ("demo a b", "Got unexpected extra argument"),
        ("check", "Missing argument 'RIG'"),
    ],
)
def test_a_command_line_that_cannot_be_read_is_one_sentence(
    capsys: pytest.CaptureFixture[str], arguments: str, start: str
) -> None:
    sentence = refused(capsys, *arguments.split())
    assert sentence.startswith(start)
    assert sentence.endswith("--help.")


def test_an_unknown_bundled_rig(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    folder = tmp_path / "out"
    assert refused(capsys, "demo", folder, "--rig", "bench") == (
        '--rig: there is no bundled rig "bench"; choose one of aluminium-rod, bench-pin, '
        "bench-pin-loose-joint, copper-pin."
    )
    assert not folder.exists()


# --- wrong input -----------------------------------------------------------------------------------------


def test_a_missing_rig_file(capsys: pytest.CaptureFixture[str], rod: Path) -> None:
    sentence = refused(capsys, "fit", rod / "rg.toml", rod / "readings.csv", "--out", rod / "x")
    assert sentence == f"{rod / 'rg.toml'}: there is no such file; check its name and folder."
    assert not (rod / "x").exists()


def test_a_missing_table_of_readings(capsys: pytest.CaptureFixture[str], rod: Path) -> None:
    sentence = refused(capsys, "check", rod / "rig.toml", rod / "reading.csv")
    assert sentence == f"{rod / 'reading.csv'}: there is no such file; check its name and folder."


def test_a_path_cannot_write_to_the_terminal(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    name = tmp_path / "rig\x1b]0;mine\x07\n.toml"
    assert refused(capsys, "check", name) == (
        f"{tmp_path}/rig?]0;mine??.toml: there is no such file; check its name and folder."
    )


def test_an_unknown_run(capsys: pytest.CaptureFixture[str], rod: Path) -> None:
    sentence = refused(
        capsys, "fit", rod / "rig.toml", rod / "readings.csv", "--out", rod / "x", "--run", "publishd"
    )
    assert sentence == f'{rod / "readings.csv"}: there is no run "publishd"; the nearest is "published".'
    assert not (rod / "x").exists()


def test_an_earlier_result_stays_without_force(capsys: pytest.CaptureFixture[str], rod: Path) -> None:
    out = rod / "result"
    out.mkdir()
    (out / "estimate.json").write_text("mine", encoding="utf-8")
    arguments = ("fit", rod / "rig.toml", rod / "readings.csv", "--out", out)
    assert refused(capsys, *arguments) == (
        f"{out}: already holds an earlier result (estimate.json); choose another folder, or overwrite with "
        "--force."
    )
    assert contents(out) == {"estimate.json": b"mine"}


def test_force_overwrites_our_files_and_no_others(
    result: tuple[Path, subprocess.CompletedProcess[str]], tmp_path: Path
) -> None:
    out = tmp_path / "result"
    shutil.copytree(result[0], out)
    (out / "notes.txt").write_text("mine", encoding="utf-8")
    before = contents(out)
    arguments = ["fit", str(out / "rig.toml"), str(out / "readings.csv"), "--out", str(out), "--seed", "4"]
    assert cli.run([*arguments, "--quiet", "--force"]) == 0
    after = contents(out)
    assert after.keys() == before.keys()
    assert after["estimate.json"] != before["estimate.json"]
    for name in ("notes.txt", "rig.toml", "readings.csv", "SOURCE.md"):
        assert after[name] == before[name]


def test_a_demo_leaves_the_files_of_a_rig_that_is_there(
    capsys: pytest.CaptureFixture[str], rod: Path
) -> None:
    before = contents(rod)
    assert refused(capsys, "demo", rod) == (
        f"{rod}: already holds SOURCE.md and readings.csv and rig.toml; choose another folder, or overwrite "
        "with --force."
    )
    assert contents(rod) == before


def test_out_is_a_file(capsys: pytest.CaptureFixture[str], rod: Path) -> None:
    out = rod / "result"
    out.write_text("mine", encoding="utf-8")
    sentence = refused(capsys, "fit", rod / "rig.toml", rod / "readings.csv", "--out", out)
    assert sentence == f"{out}: cannot be written to (File exists); give a folder that can be written."
    assert out.read_text(encoding="utf-8") == "mine"


@pytest.mark.parametrize("command", ["fit", "demo"])
def test_a_file_stands_where_a_folder_of_the_path_should(
    capsys: pytest.CaptureFixture[str], rod: Path, command: str
) -> None:
    # A folder without write permission would do as well, but root, as which CI runs, may write there.
    out = rod / "rig.toml" / "result"
    arguments = {"fit": ("fit", rod / "rig.toml", rod / "readings.csv", "--out", out), "demo": ("demo", out)}
    sentence = refused(capsys, *arguments[command])
    assert sentence == f"{out}: cannot be written to (Not a directory); give a folder that can be written."


def test_a_folder_that_cannot_be_made(capsys: pytest.CaptureFixture[str], rod: Path) -> None:
    out = Path("/proc/finback/result")
    if not Path("/proc/self").exists():
        pytest.skip("no /proc here, where nobody can make a folder")
    sentence = refused(capsys, "fit", rod / "rig.toml", rod / "readings.csv", "--out", out)
    assert sentence == (
        f"{out}: cannot be written to (No such file or directory); give a folder that can be written."
    )


# --- what nobody wishes for ------------------------------------------------------------------------------


def test_output_that_cannot_be_written_is_one_sentence() -> None:
    if not Path("/dev/full").exists():
        pytest.skip("no /dev/full here")
    with open("/dev/full", "w", encoding="utf-8") as full:
        done = subprocess.run(
            [sys.executable, "-m", "finback", "demo", "--list"],
            stdout=full, stderr=subprocess.PIPE, text=True, check=False,
        )  # fmt: skip
    assert done.returncode == 1
    assert done.stderr == "finback: standard output: No space left on device.\n"


def test_a_reader_that_leaves_early_is_no_error() -> None:
    reader, writer = os.pipe()
    os.close(reader)
    command = [sys.executable, "-m", "finback", "demo", "--list"]
    done = subprocess.run(command, stdout=writer, stderr=subprocess.PIPE, text=True, check=False)
    os.close(writer)
    assert (done.returncode, done.stderr) == (0, "")


def test_a_console_without_superscripts_gets_a_substitute(rod: Path) -> None:
    environment = {**os.environ, "PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"}
    done = subprocess.run(
        [sys.executable, "-m", "finback", "check", "rig.toml"],
        cwd=rod, capture_output=True, text=True, env=environment, check=False,
    )  # fmt: skip
    assert (done.returncode, done.stderr) == (0, "")
    assert "?" in done.stdout


def test_an_interrupt_is_one_sentence_and_status_130(rod: Path) -> None:
    process = subprocess.Popen(
        [sys.executable, "-m", "finback", "fit", "rig.toml", "readings.csv", "--out", "result"],
        cwd=rod, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    deadline = time.monotonic() + 30
    while not (rod / "result").exists() and time.monotonic() < deadline:
        time.sleep(0.01)  # the folder is made right before the computation starts
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=30)
    assert process.returncode == 130
    assert out == ""
    assert err.strip() == "finback: interrupted before the result was complete."
    assert not (rod / "result" / "estimate.json").exists()


def test_a_defect_is_one_sentence_that_asks_for_a_report(
    capsys: pytest.CaptureFixture[str], rod: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object) -> None:
        raise ZeroDivisionError("float division\nby zero")

    monkeypatch.setattr("finback.overview.describe", fail)
    assert cli.run(["check", str(rod / "rig.toml")]) == 1
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err == (
        "finback: stopped at an unexpected ZeroDivisionError (float division by zero); this is a defect of "
        "Finback, please report it with the command and the input files.\n"
    )


def test_a_failed_computation_is_status_1(
    capsys: pytest.CaptureFixture[str], rod: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise finback.ComputationError("no start with a finite density was found in 100 tries.")

    monkeypatch.setattr("finback.analysis.fit", fail)
    arguments = ["fit", rod / "rig.toml", rod / "readings.csv", "--out", rod / "result"]
    assert cli.run([str(argument) for argument in arguments]) == 1
    assert capsys.readouterr().err == "finback: no start with a finite density was found in 100 tries.\n"
