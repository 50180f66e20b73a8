"""Fits of the bundled rigs, made once for all tests of a run."""

from functools import cache
from importlib.resources import files

import finback
from finback.estimate import Estimate

DATASETS = files("finback.datasets")


@cache
def dataset(name: str, seed: int = 1) -> Estimate:
    """Return the fit of a bundled rig."""
    folder = DATASETS / name
    return finback.fit(str(folder / "rig.toml"), str(folder / "readings.csv"), seed=seed)
