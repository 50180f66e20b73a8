"""What is installed is what stands in the folders.

A sub-package or a data file that is not listed in pyproject.toml is missing from the wheel, and nothing else
says so.
"""

import os
import shutil
import subprocess
import sys
import tomllib
import zipfile
from pathlib import Path

import pytest

INSTALLED_AS = {"inverse": "finback", "models": "finback/models", "datasets": "finback/datasets"}
BUILD = "import sys; from setuptools import build_meta; print(build_meta.build_wheel(sys.argv[1]))"


def installed_name(path: Path) -> str:
    folder, *inner = path.parts
    return "/".join([INSTALLED_AS[folder], *inner])


def missing(tracked: list[Path], names: set[str]) -> list[str]:
    """Return the tracked files of the three folders that are not among the wheel's names."""
    return [
        str(path) for path in tracked if path.parts[0] in INSTALLED_AS and installed_name(path) not in names
    ]


@pytest.fixture(scope="module")
def setuptools_table(root: Path) -> dict[str, list[str]]:
    table: dict[str, list[str]] = tomllib.loads((root / "pyproject.toml").read_text(encoding="utf-8"))[
        "tool"
    ]["setuptools"]
    return table


@pytest.fixture(scope="module")
def wheel(root: Path, tracked: list[Path], tmp_path_factory: pytest.TempPathFactory) -> zipfile.ZipFile:
    """The wheel that the tracked files alone make, as a clone would: no build folder, nothing untracked."""
    source, out = tmp_path_factory.mktemp("source"), tmp_path_factory.mktemp("wheel")
    for path in tracked:
        (source / path).parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(root / path, source / path)
    done = subprocess.run(
        [sys.executable, "-c", BUILD, str(out)], cwd=source, capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr[-2000:]
    return zipfile.ZipFile(next(out.glob("*.whl")))


def test_every_folder_of_modules_is_a_listed_package(
    modules: dict[str, Path], setuptools_table: dict[str, list[str]]
) -> None:
    packages = {
        name if path.name == "__init__.py" else name.rpartition(".")[0] for name, path in modules.items()
    }
    assert packages == set(setuptools_table["packages"])


def test_every_listed_package_has_an_init(
    modules: dict[str, Path], setuptools_table: dict[str, list[str]]
) -> None:
    for package in setuptools_table["packages"]:
        assert modules[package].name == "__init__.py"


def test_the_wheel_holds_every_tracked_file_of_the_three_folders(
    wheel: zipfile.ZipFile, tracked: list[Path]
) -> None:
    assert missing(tracked, set(wheel.namelist())) == []


def test_the_wheel_holds_the_data_that_the_tool_reads(wheel: zipfile.ZipFile) -> None:
    names = set(wheel.namelist())
    assert {"finback/py.typed", "finback/models/py.typed", "finback/datasets/bench-pin/rig.toml"} <= names
    assert any(name.startswith("finback/report/templates/") for name in names)


def test_the_wheel_has_one_top_level_name(wheel: zipfile.ZipFile) -> None:
    assert {name.split("/")[0] for name in wheel.namelist() if ".dist-info/" not in name} == {"finback"}


def test_the_wheel_installs_the_command(wheel: zipfile.ZipFile) -> None:
    entry = next(name for name in wheel.namelist() if name.endswith("entry_points.txt"))
    assert "finback = finback.cli:main" in wheel.read(entry).decode()


def test_a_missing_file_is_seen() -> None:
    tracked = [Path("inverse/report/files.py"), Path("models/fin.py"), Path("README.md")]
    assert missing(tracked, {"finback/models/fin.py"}) == ["inverse/report/files.py"]


def test_the_tests_run_on_an_installed_finback() -> None:
    import finback

    assert os.path.isabs(finback.__file__)
    assert Path(finback.__file__).parent.name in ("finback", "inverse")
