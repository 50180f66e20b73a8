"""What the contract tests look at: the repository's files and the modules in them."""

import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
FOLDERS = {"inverse": "finback", "models": "finback.models", "datasets": "finback.datasets"}


def _module_name(path: Path) -> str:
    folder, *inner = path.relative_to(ROOT).with_suffix("").parts
    parts = [FOLDERS[folder], *inner]
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


@pytest.fixture(scope="session")
def root() -> Path:
    return ROOT


@pytest.fixture(scope="session")
def modules() -> dict[str, Path]:
    """Every module of the three packages by its import name."""
    found = [path for folder in FOLDERS for path in sorted((ROOT / folder).rglob("*.py"))]
    return {_module_name(path): path for path in found}


@pytest.fixture(scope="session")
def tracked() -> list[Path]:
    """Every file under version control, relative to the root."""
    listing = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=False)
    if listing.returncode != 0:
        pytest.skip("not a git clone: there is no list of tracked files")
    return [Path(name) for name in listing.stdout.split("\0") if name and (ROOT / name).exists()]
