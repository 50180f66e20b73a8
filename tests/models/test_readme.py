"""models/README.md tells the truth: its example runs, its table of Biot numbers and its counts are right."""

import doctest
import json
import re
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import j0, j1

import finback.models

HERE = Path(__file__).parent
README = (HERE.parents[1] / "models" / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```python\n(.*?)^```$", README, re.MULTILINE | re.DOTALL)


def test_the_example_prints_what_it_says():
    session = doctest.DocTestParser().get_doctest(
        "".join(BLOCKS), {}, "models/README.md", "models/README.md", 0
    )
    said = []
    outcome = doctest.DocTestRunner(verbose=False).run(session, out=said.append)
    assert outcome.attempted >= 10
    assert outcome.failed == 0, "".join(said)


def decay_of_plate(biot):
    """First root of z tan z = Bi: decay of a long plate fin over half its thickness."""
    return brentq(lambda z: z * np.tan(z) - biot, 1e-9, np.pi / 2 - 1e-9)


def decay_of_pin(biot):
    """First root of z J1(z) = (h r/k) J0(z), h r/k = 2 Bi: decay of a long pin over its radius."""
    return brentq(lambda z: z * j1(z) - 2 * biot * j0(z), 1e-9, 2.404)


@pytest.mark.parametrize("biot", [0.01, 0.1, 0.78])
def test_the_table_of_biot_numbers_is_exact(biot):
    """In one dimension (m a)² is Bi for the plate and 4 Bi for the pin, and h/k follows m²."""
    plate = 100 * (1 - decay_of_plate(biot) ** 2 / biot)
    round_pin = 100 * (1 - decay_of_pin(biot) ** 2 / (4 * biot))
    assert f"| {biot:g} | {plate:.1f} % | {round_pin:.1f} % |" in README


def test_every_public_name_is_explained():
    assert [name for name in finback.models.__all__ if not re.search(rf"\b{name}\b", README)] == []


def test_the_worked_examples_are_as_many_as_it_says():
    data = json.loads((HERE / "data" / "worked_examples.json").read_text(encoding="utf-8"))["examples"]
    books = {(example["author"], example["book"]) for example in data}
    assert f"{len(data)} worked examples of {len(books)} textbooks" in " ".join(README.split())
