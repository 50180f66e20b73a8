"""The repository holds what it should and nothing of the machine it was written on."""

import re
from pathlib import Path

TOP_LEVEL = {
    *("README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE", "pyproject.toml", ".gitignore"),
    *(".ci", "models", "inverse", "datasets", "tests"),
}
MACHINE = re.compile(r"/(?:home|root|Users|work|tmp|opt|usr/local|mnt|srv)/\w|[A-Z]:\\\\?Users")
HOSTS = re.compile(
    r"\b(?:pypi\.org|pythonhosted\.org|npmjs\.|conda\.anaconda|deb\.debian\.org|artifactory|nexus\.)", re.I
)
BINARY = {".png", ".xlsx", ".nc", ".ico"}
ALLOWED = {"tests/contracts/test_repository.py"}  # it spells out what it looks for


def complaints(name: str, text: str) -> list[str]:
    """Return what a tracked file says that it should not."""
    return [f"{name}: {found.group()}" for pattern in (MACHINE, HOSTS) for found in pattern.finditer(text)]


def test_the_top_level_holds_the_listed_names_only(tracked: list[Path]) -> None:
    assert {path.parts[0] for path in tracked} == TOP_LEVEL


def test_no_tracked_file_names_a_machine_or_a_registry(tracked: list[Path], root: Path) -> None:
    found = []
    for path in tracked:
        if path.suffix not in BINARY and path.as_posix() not in ALLOWED:
            found += complaints(str(path), (root / path).read_text(encoding="utf-8"))
    assert found == []


def test_a_path_and_a_host_are_seen() -> None:
    assert complaints("a", "see /home/someone/x and https://pypi.org/simple") == ["a: /home/s", "a: pypi.org"]
    assert complaints("a", "write to /dev/null, W/(m K) and models/fin.py") == []


def test_no_generated_file_is_tracked(tracked: list[Path]) -> None:
    generated = {"build", "dist", "__pycache__", ".venv", ".venv-test", "finback-demo", "finback.egg-info"}
    assert not [path for path in tracked if generated & set(path.parts)]


def test_every_link_between_documents_leads_somewhere(tracked: list[Path], root: Path) -> None:
    links = re.compile(r"\]\((?!https?:)([^)#]+)\)")
    broken = [
        f"{path}: {target}"
        for path in tracked
        if path.suffix == ".md"
        for target in links.findall((root / path).read_text(encoding="utf-8"))
        if not (root / path.parent / target).exists()
    ]
    assert broken == []
