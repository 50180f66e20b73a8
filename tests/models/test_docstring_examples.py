"""The examples in the docstrings of the forward model print what they say."""

import doctest
import importlib
import pkgutil

import pytest

import finback.models

NAMES = sorted(each.name for each in pkgutil.walk_packages(finback.models.__path__, "finback.models."))


@pytest.mark.parametrize("name", NAMES)
def test_examples(name):
    said = []
    runner = doctest.DocTestRunner(verbose=False)
    for each in doctest.DocTestFinder().find(importlib.import_module(name), name):
        runner.run(each, out=said.append)
    assert runner.summarize(verbose=False).failed == 0, "".join(said)


def test_every_correlation_shows_an_example():
    """Each function that returns a Nusselt number, with a spot value of its own."""
    from finback.models import correlations

    bare = [
        name
        for name in correlations.__all__
        if name.islower() and ">>>" not in (getattr(correlations, name).__doc__ or "")
    ]
    assert bare == []
