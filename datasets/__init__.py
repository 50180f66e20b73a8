"""Rigs that come with Finback: published profiles, and an invented rig with known truth.

One folder a rig: `rig.toml`, `readings.csv`, `SOURCE.md`, and `truth.json` where the truth is known.
"""

import shutil
from importlib.resources import files
from pathlib import Path

__all__ = ["copy", "file_names", "names", "path", "title"]


def names() -> tuple[str, ...]:
    """Return the names of the bundled rigs, in alphabetical order."""
    return tuple(sorted(entry.name for entry in _root().iterdir() if (entry / "rig.toml").is_file()))


def path(name: str) -> Path:
    """Return the folder of a bundled rig.

    Argument: name, one of `names()`. Raises KeyError for any other.
    """
    if name not in names():
        raise KeyError(name)
    return _root() / name


def title(name: str) -> str:
    """Return what a bundled rig is, in one line: the heading of its SOURCE.md.

    Argument: name, one of `names()`. Raises KeyError for any other.
    """
    first, _, _ = (path(name) / "SOURCE.md").read_text(encoding="utf-8").partition("\n")
    return first.removeprefix("# ")


def file_names(name: str) -> tuple[str, ...]:
    """Return the names of the files of a bundled rig.

    Argument: name, one of `names()`. Raises KeyError for any other.
    """
    return tuple(sorted(entry.name for entry in path(name).iterdir() if entry.is_file()))


def copy(name: str, folder: Path) -> None:
    """Copy the files of a bundled rig into a folder that exists, over files of the same names.

    Arguments: name, one of `names()`; folder. Raises KeyError for an unknown name, OSError where the folder
    cannot be written.
    """
    for file_name in file_names(name):
        shutil.copyfile(path(name) / file_name, folder / file_name)


def _root() -> Path:
    return Path(str(files(__name__)))
