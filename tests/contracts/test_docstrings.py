"""Public names say what they are, and give the unit of every physical number they take or return.

A unit stands in square brackets, `[m]`, `[W/(m² K)]`, `[1]`; in the docstring of the function, of its class,
or of its module where one sentence holds for all of it. What counts as a physical number: everything that is
a float or an array in `finback.models`, and elsewhere whatever bears a name of `PHYSICAL`.
"""

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

UNIT = re.compile(r"\[[^\]\n]*(?<![A-Za-z])(?:mm|m|K|W|1|degC|°C|J|kg|s|Pa)[²³]?(?![A-Za-z0-9])[^\]\n]*\]")
NUMERIC = re.compile(r"\b(?:float|Array|Values|NDArray)\b")
PHYSICAL = {
    *("air", "plate", "joint", "heat", "coefficient", "conductivity", "resistance", "temperature"),
    *("temperatures", "position", "position_sd", "positions", "length", "diameter", "thickness"),
    *("area", "perimeter"),
}


def undocumented(tree: ast.Module) -> Iterator[str]:
    """Yield the public functions, classes and methods without a docstring."""
    for owner, node in public(tree):
        if not ast.get_docstring(node):
            yield f"{owner}{node.name}"


def without_unit(tree: ast.Module, every_number: bool) -> Iterator[str]:
    """Yield the public functions and classes of values that hold a physical number and state no unit."""
    whole = ast.get_docstring(tree) or ""
    for owner, node in public(tree):
        documented = [ast.get_docstring(node) or "", whole]
        if owner:
            documented.append(class_docstring(tree, owner.rstrip(".")))
        if holds_physical(node, every_number) and not UNIT.search(" ".join(documented)):
            yield f"{owner}{node.name}"


def public(tree: ast.Module) -> Iterator[tuple[str, ast.FunctionDef | ast.ClassDef]]:
    """Yield (owner, node) of each public function, class and method; overloads and magic methods left out."""
    for node in tree.body:
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            yield "", node
            if isinstance(node, ast.ClassDef):
                for inner in node.body:
                    if isinstance(inner, ast.FunctionDef) and not inner.name.startswith("_"):
                        yield f"{node.name}.", inner


def class_docstring(tree: ast.Module, name: str) -> str:
    found = next(node for node in tree.body if isinstance(node, ast.ClassDef) and node.name == name)
    return ast.get_docstring(found) or ""


def holds_physical(node: ast.FunctionDef | ast.ClassDef, every_number: bool) -> bool:
    if isinstance(node, ast.ClassDef):
        fields = [
            each
            for each in node.body
            if isinstance(each, ast.AnnAssign) and isinstance(each.target, ast.Name)
        ]
        named = [(each.target.id, each.annotation) for each in fields if isinstance(each.target, ast.Name)]
    else:
        arguments = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
        named = [(each.arg, each.annotation) for each in arguments] + [(node.name, node.returns)]
    numbers = [
        name
        for name, annotation in named
        if annotation is not None and NUMERIC.search(ast.unparse(annotation))
    ]
    return any(every_number or name in PHYSICAL for name in numbers)


@pytest.fixture(scope="module")
def trees(modules: dict[str, Path]) -> dict[str, ast.Module]:
    return {name: ast.parse(path.read_text(encoding="utf-8")) for name, path in modules.items()}


def test_every_public_name_has_a_docstring(trees: dict[str, ast.Module]) -> None:
    assert [f"{name}: {bare}" for name, tree in trees.items() for bare in undocumented(tree)] == []


def test_every_module_opens_with_what_it_is_for(trees: dict[str, ast.Module]) -> None:
    assert [name for name, tree in trees.items() if not ast.get_docstring(tree)] == []


def test_every_physical_number_has_its_unit(trees: dict[str, ast.Module]) -> None:
    silent = [
        f"{name}: {bare}"
        for name, tree in trees.items()
        for bare in without_unit(tree, every_number=name.startswith("finback.models"))
    ]
    assert silent == []


SAMPLE = '''
"""A module."""

def area(diameter: float) -> float:
    """Return the area of a circle."""

def heat(coefficient: float, area: float) -> float:
    """Return the heat flow [W] of a coefficient [W/(m² K)] on an area [m²], see [the book]."""

def count(values: Array) -> int:
    """Return how many there are, as in [the book] or list[str]."""

class Plate:
    temperature: float

    def name(self): ...
'''


def test_the_checks_see_what_is_missing() -> None:
    tree = ast.parse(SAMPLE)
    assert list(undocumented(tree)) == ["Plate", "Plate.name"]
    assert list(without_unit(tree, every_number=True)) == ["area", "count", "Plate"]
    assert list(without_unit(tree, every_number=False)) == ["area", "Plate"]
