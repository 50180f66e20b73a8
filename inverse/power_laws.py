"""The laws that runs are fitted with, as ln y over xi = ln x: a power law, and one with an offset.

Each has coordinates that are free of bounds, a value and a slope for blocks of them, what is known of them
beforehand, and the way to the constants that an engineer writes down. xi counts from the pivot, the mean of
the runs, where the constants are least entangled.
"""

from collections.abc import Mapping
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

EXPONENT, EXPONENT_SPREAD = 0.5, 1.0
"""Exponent of a power law beforehand and its standard deviation [1]: boundary layers of all kinds lie within
0.2 and 0.8, so that it hardly says anything, and keeps a table without spread from an endless slope."""

OFFSET_EXPONENT, OFFSET_SPREAD = 0.55, 0.5
"""Median of the exponent beside an offset and the standard deviation of its logarithm [1]: 0.2 to 1.5 with
95 %."""


class Law(Protocol):
    """A law in coordinates z (n_sets, p), pivot apart: what the fit asks of it."""

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the constants."""

    def value(self, z: Array, xi: Array) -> Array:
        """Return ln y; z (n_sets, p), xi broadcasting with (n_sets, 1, 1)."""

    def slope(self, z: Array, xi: Array) -> Array:
        """Return d ln y/d xi, shapes as of `value`."""

    def log_prior(self, z: Array) -> Array:
        """Return the log density beforehand, (n_sets, p) -> (n_sets,)."""

    def allowed(self, z: Array) -> NDArray[np.bool_]:
        """Tell which coordinates (n_sets, p) are those of a law that can be."""

    def starts(self, level: float, slope: float) -> Array:
        """Return coordinates to start from (n, p), for a level and a slope of ln y at the pivot."""

    def constants(self, z: Array, pivot: float) -> Mapping[str, Array]:
        """Return the constants of draws z (n, p) by name, each (n,)."""

    def moved(self, z: Array, along: Array, up: Array) -> Array:
        """Return draws z (n, p) of the law moved by `along` in xi and `up` in ln y, (n,) each."""


class PowerLaw:
    """y = C xⁿ; coordinates ln y at the pivot, and n."""

    names = ("C", "n")

    def value(self, z: Array, xi: Array) -> Array:
        """Return ln y."""
        found: Array = z[:, 0, None, None] + z[:, 1, None, None] * xi
        return found

    def slope(self, z: Array, xi: Array) -> Array:  # noqa: ARG002  # the same everywhere
        """Return n."""
        return z[:, 1, None, None]

    def log_prior(self, z: Array) -> Array:
        """Return the log density beforehand: the level is open, n about one half."""
        found: Array = -0.5 * np.square((z[:, 1] - EXPONENT) / EXPONENT_SPREAD)
        return found

    def allowed(self, z: Array) -> NDArray[np.bool_]:
        """Tell that all are."""
        return np.ones(len(z), dtype=np.bool_)

    def starts(self, level: float, slope: float) -> Array:
        """Return the one start there is."""
        return np.array([[level, slope]])

    def constants(self, z: Array, pivot: float) -> Mapping[str, Array]:
        """Return C and n."""
        return {"C": np.exp(z[:, 0] - z[:, 1] * pivot), "n": z[:, 1]}

    def moved(self, z: Array, along: Array, up: Array) -> Array:
        """Return the law moved."""
        return np.stack([z[:, 0] - z[:, 1] * along + up, z[:, 1]], axis=1)


class OffsetLaw:
    """y = a + b xⁿ; coordinates ln y at the pivot, the share of a in it, and ln n.

    King's form of a body in a stream, with a what it loses in still air. The share is even between 0 and 1
    beforehand. As a coordinate it may be negative, which keeps a posterior regular whose a is about nothing;
    such draws are not `allowed`.
    """

    names = ("a", "b", "n")

    def value(self, z: Array, xi: Array) -> Array:
        """Return ln y."""
        rising = (1 - z[:, 1, None, None]) * np.expm1(np.exp(z[:, 2, None, None]) * xi)
        found: Array = z[:, 0, None, None] + np.log1p(rising)
        return found

    def slope(self, z: Array, xi: Array) -> Array:
        """Return n times the share of b xⁿ in y."""
        n, still = np.exp(z[:, 2, None, None]), z[:, 1, None, None]
        rising = (1 - still) * np.exp(n * xi)
        found: Array = n * rising / (still + rising)
        return found

    def log_prior(self, z: Array) -> Array:
        """Return the log density beforehand."""
        found: Array = -0.5 * np.square((z[:, 2] - np.log(OFFSET_EXPONENT)) / OFFSET_SPREAD)
        return found

    def allowed(self, z: Array) -> NDArray[np.bool_]:
        """Tell where neither a nor b is negative."""
        found: NDArray[np.bool_] = (z[:, 1] >= 0) & (z[:, 1] <= 1)
        return found

    def starts(self, level: float, slope: float) -> Array:
        """Return starts with a small, a middling and a large offset."""
        shares = np.array([0.05, 0.3, 0.6])
        exponents = np.clip(max(slope, 0.05) / (1 - shares), 0.1, 3.0)
        return np.stack([np.full(3, level), shares, np.log(exponents)], axis=1)

    def constants(self, z: Array, pivot: float) -> Mapping[str, Array]:
        """Return a, b and n."""
        n, still, level = np.exp(z[:, 2]), z[:, 1], np.exp(z[:, 0])
        return {"a": level * still, "b": level * (1 - still) * np.exp(-n * pivot), "n": n}

    def moved(self, z: Array, along: Array, up: Array) -> Array:
        """Return the law moved: along x the rising part alone changes."""
        still, rising = z[:, 1], (1 - z[:, 1]) * np.exp(-np.exp(z[:, 2]) * along)
        total = still + rising
        return np.stack([z[:, 0] + np.log(total) + up, still / total, z[:, 2]], axis=1)
