"""Imports run one way: read from the source, so that a lazy import inside a function counts too."""

import ast
import sys
from collections.abc import Iterator
from graphlib import CycleError, TopologicalSorter
from pathlib import Path

import pytest

LAYERS = (
    "models.constants models.validity models.names",
    "models.conductivity models.vapour",
    "models.air models.materials",
    "models.emissivity models.contact_resistance models.correlations.nusselt",
    "models.correlations.free_plate models.correlations.forced_plate models.correlations.channels",
    "models.correlations.free_cylinder models.correlations.forced_cylinder models.correlations.ducts",
    "models.correlations.banks",
    "models.correlations",
    "models.exposure",
    "models.laws",
    "models.expected",
    "models.profiles.protocol models.ends models.surface",
    "models.profiles.uniform models.profiles.straight models.profiles.pins models.profiles.annular",
    "models.profiles.table",
    "models.profiles",
    "models.fin models.solution models.coupling models.elements models.waves",
    "models.closed_form models.bessel_forms models.modes models.sides models.gauss models.endless",
    "models.general models.nodes",
    "models.performance models.plate models.iteration",
    "models.kinks",
    "models.nonlinear",
    "models.solve",
    "models",
    "errors findings wording cubics lattice pareto",
    "quantity thermocouples",
    "priors noise tails misfit least_squares laplace diagnostics entries table",
    "parameters rig_file shape_table proposal",
    "sensors sampling shapes handbook surroundings",
    "rig columns evidence",
    "readings readings_stream fast",
    "checks problem expectation outline",
    "posing derived",
    "optimum estimate",
    "identifiability routes",
    "candidates",
    "normals suspects",
    "hypotheses",
    "densities faults",
    "healthy restoring next_measurements",
    "causes",
    "geometry",
    "linear",
    "summaries concerns",
    "budget sensitivity conclusions",
    "analysis quick diagnosis",
    "ledger campaign_block",
    "campaign_workers",
    "campaign",
    "pooled_runs",
    "pooled_model",
    "arrow",
    "pooled_fit",
    "pooled_conclusions",
    "pooled",
    "campaign_digest",
    "power_laws results groups",
    "errors_in_variables published",
    "run_points",
    "correlate",
    "report report.phrases report.method",
    "report.comparison report.shares",
    "report.scenes report.view",
    "report.layout",
    "report.figures report.terminal",
    "report.campaign_terminal report.campaign_view report.campaign_figures",
    "report.html",
    "report.campaign_page",
    "campaign_table",
    "report.files",
    "report.pooled_files",
    "report.correlation report.correlation_figure",
    "report.correlation_page",
    "report.correlation_files",
    "report.diagnosis_words report.diagnosis_scenes",
    "report.diagnosis_view report.diagnosis_figure",
    "report.diagnosis_page report.diagnosis_terminal",
    "report.diagnosis_files",
    "overview",
    "cli",
    "__main__",
)
"""Lowest first: a module imports from its own layer and from those above it in this list."""

LIBRARIES = {
    "arviz": {"finback.diagnostics"},
    "distributed": {"finback.campaign"},
    "emcee": {"finback.sampling"},
    "matplotlib": {
        "finback.report.figures",
        "finback.report.campaign_figures",
        "finback.report.correlation_figure",
        "finback.report.diagnosis_figure",
    },
    "openpyxl": {"finback.table"},
    "pint": {"finback.quantity"},
    "pyarrow": {"finback.campaign_table", "finback.results"},
    "pydantic": {"finback.rig_file"},
    "typer": {"finback.cli"},
}
"""Libraries that only these modules may import."""

PRINTS = {"finback.cli"}
TOUCHES_FILES = (
    "finback.readings",
    "finback.rig",
    "finback.results",
    "finback.campaign",
    "finback.report",
    "finback.cli",
    "finback.datasets",
)
"""Modules that may touch files, with everything below them."""

FILE_MODULES = {"shutil", "tempfile", "glob"}
FILE_CALLS = {
    *(
        "open",
        "read_text",
        "write_text",
        "read_bytes",
        "write_bytes",
        "mkdir",
        "makedirs",
        "unlink",
        "touch",
        "rmdir",
    ),
    *("exists", "is_file", "is_dir", "stat", "iterdir", "rglob", "samefile", "resolve"),
    *("read_csv", "read_excel", "to_csv", "to_netcdf", "savefig", "loadtxt", "savetxt"),
}


def parse(text: str) -> ast.Module:
    return ast.parse(text)


def imports(tree: ast.AST, known: set[str]) -> Iterator[str]:
    """Yield what a module imports; `from finback.models import solve` is the module solve if there is one."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "a relative import"
            for alias in node.names:
                whole = f"{node.module}.{alias.name}"
                yield whole if whole in known else str(node.module)


def misplaced(own: str, wanted: set[str], ranks: dict[str, int]) -> list[str]:
    """Return the modules among `wanted` that lie in a higher layer than `own`."""
    return sorted(name for name in wanted if ranks[name] > ranks[own])


def calls(tree: ast.AST) -> set[str]:
    """Return the names of everything that is called, methods by their last name."""
    found = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Call):
            target = node.func
            found.add(target.attr if isinstance(target, ast.Attribute) else getattr(target, "id", ""))
    return found


@pytest.fixture(scope="module")
def trees(modules: dict[str, Path]) -> dict[str, ast.Module]:
    return {name: parse(path.read_text(encoding="utf-8")) for name, path in modules.items()}


@pytest.fixture(scope="module")
def wanted(trees: dict[str, ast.Module]) -> dict[str, set[str]]:
    """What each module imports, except what only a type checker or `__getattr__` of the package loads."""
    found = {name: set(imports(tree, set(trees))) - {"finback"} for name, tree in trees.items()}
    return {name: each for name, each in found.items() if name != "finback"}


@pytest.fixture(scope="module")
def ranks(wanted: dict[str, set[str]]) -> dict[str, int]:
    placed = {f"finback.{name}": rank for rank, names in enumerate(LAYERS) for name in names.split()}
    placed["finback.datasets"] = 0
    unplaced = sorted(set(wanted) - set(placed))
    assert not unplaced, f"give {unplaced} a place in LAYERS"
    return placed


def test_every_module_imports_only_from_its_own_layer_and_below(
    wanted: dict[str, set[str]], ranks: dict[str, int]
) -> None:
    wrong = {name: misplaced(name, each & set(wanted), ranks) for name, each in wanted.items()}
    assert not {name: bad for name, bad in wrong.items() if bad}


def test_no_module_is_placed_that_is_gone(wanted: dict[str, set[str]], ranks: dict[str, int]) -> None:
    assert set(ranks) <= set(wanted)


def test_there_is_no_import_cycle(wanted: dict[str, set[str]]) -> None:
    graph = {name: each & set(wanted) - {name} for name, each in wanted.items()}
    try:
        TopologicalSorter(graph).prepare()
    except CycleError as error:
        pytest.fail(f"a cycle of imports: {error.args[1]}")


def test_models_import_numpy_scipy_and_themselves_alone(wanted: dict[str, set[str]]) -> None:
    allowed = {"numpy", "scipy", *sys.stdlib_module_names}
    for name, each in wanted.items():
        if name.startswith("finback.models"):
            strangers = {other for other in each if other.partition(".")[0] not in allowed}
            assert all(other.startswith("finback.models") for other in strangers), (name, strangers)


def test_datasets_import_the_standard_library_alone(wanted: dict[str, set[str]]) -> None:
    assert {other.partition(".")[0] for other in wanted["finback.datasets"]} <= sys.stdlib_module_names


@pytest.mark.parametrize("library", sorted(LIBRARIES))
def test_a_library_is_imported_where_it_belongs(library: str, wanted: dict[str, set[str]]) -> None:
    users = {name for name, each in wanted.items() if library in {other.partition(".")[0] for other in each}}
    assert users == LIBRARIES[library]


def test_only_the_command_line_prints(trees: dict[str, ast.Module]) -> None:
    for name, tree in trees.items():
        printing = "print" in calls(tree) or any(
            isinstance(node, ast.Attribute) and node.attr in ("stdout", "stderr") for node in ast.walk(tree)
        )
        assert not printing or name in PRINTS, name


def test_only_the_allowed_modules_touch_files(
    trees: dict[str, ast.Module], wanted: dict[str, set[str]]
) -> None:
    for name, each in wanted.items():
        touching = (calls(trees[name]) & FILE_CALLS) | (each & FILE_MODULES)
        allowed = any(
            name == prefix or name.startswith((prefix + ".", prefix + "_")) for prefix in TOUCHES_FILES
        )
        assert not touching or allowed, f"{name} calls {sorted(touching)}"


def test_the_checks_see_a_wrong_import() -> None:
    sample = parse("def f():\n    from finback.models import solve\n    open('x').read()\n    print(1)\n")
    assert set(imports(sample, {"finback.models.solve"})) == {"finback.models.solve"}
    assert misplaced("a", {"b", "c"}, {"a": 1, "b": 2, "c": 0}) == ["b"]
    assert {"open", "print"} <= calls(sample)
    assert "open" in FILE_CALLS
