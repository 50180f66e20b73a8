"""Every module imports alone, and a light one stays light."""

import subprocess
import sys
from pathlib import Path

ALONE = """
import importlib, sys, traceback
failed = []
for name in sys.argv[1:]:
    for other in [each for each in sys.modules if each == "finback" or each.startswith("finback.")]:
        del sys.modules[other]
    try:
        importlib.import_module(name)
    except Exception:
        failed.append(f"{name}: {traceback.format_exc()}")
print("\\n".join(failed))
"""
HEAVY = (
    "numpy",
    "scipy",
    "pandas",
    "matplotlib",
    "arviz",
    "xarray",
    "pint",
    "pydantic",
    "emcee",
    "jinja2",
    "openpyxl",
)


def run(code: str, *arguments: str, cwd: Path) -> str:
    command = [sys.executable, "-c", code, *arguments]
    done = subprocess.run(command, cwd=cwd, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout.strip()


def test_every_module_imports_alone(modules: dict[str, Path], tmp_path: Path) -> None:
    # Each import starts with nothing of Finback loaded; the libraries stay, or it would take a minute.
    names = sorted(set(modules) - {"finback.__main__"}, key=lambda name: (-name.count("."), name))
    assert run(ALONE, *names, cwd=tmp_path) == ""


def test_the_command_line_and_the_package_load_nothing_heavy(tmp_path: Path) -> None:
    code = "import sys, finback, finback.cli, finback.datasets; print(*sys.modules)"
    loaded = set(run(code, cwd=tmp_path).split())
    assert loaded.isdisjoint(HEAVY)


def test_the_models_load_nothing_of_the_inverse_side(tmp_path: Path) -> None:
    code = "import sys, finback.models; print(*(m for m in sys.modules if m.startswith('finback')))"
    names = run(code, cwd=tmp_path).split()
    assert all(name == "finback" or name.startswith("finback.models") for name in names)


def test_the_folders_names_are_not_importable_where_it_is_installed(tmp_path: Path) -> None:
    code = """
import importlib.util
print([name for name in ("models", "inverse") if importlib.util.find_spec(name) is not None])
"""
    assert run(code, cwd=tmp_path) == "[]"


def test_a_strangers_models_module_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / "models.py").write_text("mine = True\n", encoding="utf-8")
    code = "import models, finback.models; print(models.mine, hasattr(finback.models, 'solve'))"
    assert run(code, cwd=tmp_path) == "True True"
