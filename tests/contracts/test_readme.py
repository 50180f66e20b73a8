"""README.md tells the truth: its commands, options, files and example are the ones there are."""

import re
import tomllib
from pathlib import Path
from typing import Any

import pytest
import typer

from finback import cli, rig, rig_file
from finback import readings as readings_reader
from finback.findings import Finding

OPTION = re.compile(r"(?<![\w-])--[a-z][a-z-]*")
FOREIGN = {
    "--check",
    "--no-deps",
    "--port",
    "--nworkers",
    "--nthreads",
}  # options of other programs, should the README ever show one
CAUTIONS = ("hot", "mains", "fans", "pressure", "local codes", "licensed practice", "no certificate")


@pytest.fixture(scope="module")
def readme(root: Path) -> str:
    return (root / "README.md").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def commands() -> dict[str, Any]:
    group: Any = typer.main.get_command(cli.app)
    return dict(group.commands)


def blocks(text: str, language: str) -> list[str]:
    """Return the fenced code blocks of one language."""
    return re.findall(rf"^```{language}\n(.*?)^```$", text, re.MULTILINE | re.DOTALL)


def long_options(command: Any) -> set[str]:
    return {name for parameter in command.params for name in parameter.opts if name.startswith("--")}


def test_every_command_and_option_stands_in_the_readme(readme: str, commands: dict[str, Any]) -> None:
    group = typer.main.get_command(cli.app)
    options = long_options(group).union(*(long_options(command) for command in commands.values()))
    assert {name for name in commands if f"`finback {name}" not in readme} == set()
    assert options - set(OPTION.findall(readme)) == set()
    assert {"--out", "--seed"} <= options  # or the two lines above compare nothing


def test_the_readme_names_no_option_that_is_not_there(readme: str, commands: dict[str, Any]) -> None:
    options = long_options(typer.main.get_command(cli.app)) | {"--help"}
    assert (
        set(OPTION.findall(readme)) - options.union(*map(long_options, commands.values())) - FOREIGN == set()
    )


@pytest.mark.parametrize("command", ["fit", "batch", "demo", "check"])
def test_the_option_table_names_the_right_commands(
    readme: str, commands: dict[str, Any], command: str
) -> None:
    rows = re.findall(r"^\| `(--[a-z-]+)[^|]*\| ([^|]*)\|", readme, re.MULTILINE)
    told = {option for option, owners in rows if f"`{command}`" in owners}
    assert told == long_options(commands[command]) - {"--help"}


def test_the_first_lines_are_the_job_and_two_commands(readme: str) -> None:
    install, test = blocks(readme, "sh")[:2]
    assert install.strip().count("\n") == test.strip().count("\n") == 0
    assert install.strip().endswith("finback demo finback-demo")
    assert readme.index(install) < readme.index(test) < readme.index("\n## ")


def test_the_ci_script_runs_the_readmes_test_command_word_for_word(readme: str, root: Path) -> None:
    script = (root / ".ci" / "run").read_text(encoding="utf-8")
    assert blocks(readme, "sh")[1].strip() in map(str.strip, script.splitlines())


def test_the_rig_and_the_readings_shown_can_be_read(readme: str, tmp_path: Path) -> None:
    (shown_rig,), (shown_readings,) = blocks(readme, "toml"), blocks(readme, "csv")
    assert tomllib.loads(shown_rig)["sensors"]["F1"] == {"at": "8 mm"}
    (tmp_path / "rig.toml").write_text(shown_rig, encoding="utf-8")
    (tmp_path / "readings.csv").write_text(shown_readings, encoding="utf-8")
    table = readings_reader.read(tmp_path / "readings.csv", rig.read(tmp_path / "rig.toml"))
    assert table.runs == ("morning", "after cleaning")
    assert table.pick("morning").values["AI"] == pytest.approx(273.15 + 22.0, abs=1e-9)


def told_keys() -> set[str]:
    """Return what a rig file may hold in its tables: profiles, and the keys that are not refused."""
    sections = (rig_file.FinSection, rig_file.MaterialSection, rig_file.AirSection, rig_file.JointSection)
    fields = {name: field for section in sections for name, field in section.model_fields.items()}
    taken = {name for name, field in fields.items() if field.annotation is not type(None)}
    return taken | set(rig_file.PROFILES)


def test_every_profile_and_every_key_of_a_rig_stands_in_the_readme(readme: str) -> None:
    _, _, section = readme.partition("### rig.toml")
    section = section.partition("\n### ")[0]
    assert {name for name in told_keys() if not re.search(rf"(?<![\w-]){name}(?![\w-])", section)} == set()
    assert {"convex-pin", "tip_thickness", "humidity"} <= told_keys()  # or the line above compares nothing


def test_the_python_example_runs(readme: str, capsys: pytest.CaptureFixture[str]) -> None:
    (example,) = blocks(readme, "python")
    names: dict[str, Any] = {}
    exec(compile(example, "README.md", "exec"), names)  # noqa: S102  # the example is the README's own
    assert "h = " in capsys.readouterr().out
    assert all(isinstance(finding, Finding) for finding in names["estimate"].findings)


@pytest.mark.parametrize("caution", CAUTIONS)
def test_the_cautions_are_there(readme: str, caution: str) -> None:
    _, _, cautions = readme.partition("## Cautions")
    assert caution in cautions.partition("\n## ")[0].lower().replace("\n", " ")


@pytest.mark.parametrize("status", [0, 1, 2, 130])
def test_every_exit_status_is_explained(readme: str, status: int) -> None:
    assert f"**{status}**" in readme
