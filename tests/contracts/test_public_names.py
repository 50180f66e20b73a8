"""The public names of `finback` itself."""

import ast
import tomllib
from pathlib import Path

import pytest

import finback


@pytest.mark.parametrize("name", finback.__all__)
def test_every_public_name_is_there(name: str) -> None:
    assert getattr(finback, name) is not None
    assert name in dir(finback)


def test_an_unknown_name_is_an_ordinary_attribute_error() -> None:
    with pytest.raises(AttributeError, match="module 'finback' has no attribute 'nonsense'"):
        _ = finback.nonsense


def test_a_type_checker_sees_the_same_names(root: Path) -> None:
    tree = ast.parse((root / "inverse" / "__init__.py").read_text(encoding="utf-8"))
    block = next(node for node in tree.body if isinstance(node, ast.If))
    seen = {
        alias.asname or alias.name
        for node in block.body
        if isinstance(node, ast.ImportFrom)
        for alias in node.names
    }
    assert seen == set(finback.__all__) - {"__version__"}


def test_the_version_is_one(root: Path) -> None:
    project = tomllib.loads((root / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    assert finback.__version__ == project["version"]


def test_the_changelog_has_an_entry_for_the_version(root: Path) -> None:
    lines = (root / "CHANGELOG.md").read_text(encoding="utf-8").splitlines()
    assert any(line.split()[:2] == ["##", finback.__version__] for line in lines)
