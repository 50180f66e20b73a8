"""Geometry: what uncertain lengths of the fin add to the quantities that follow from them.

A length that is not exactly known enters the readings' covariance as a reading error would (`posing`), so
that every parameter carries it. A quantity such as the heat into the fin depends on the length itself as
well. With G the readings' change by one standard uncertainty of each length, C their covariance, r the
residuals at a draw, and all lengths standard normal beforehand, they are given the draw

    delta | z ~ N(G' C^-1 r, I - G' C^-1 G),

and each quantity q moves by (dq/d delta) delta. Everything is linear in delta. Beside heavy tails the lengths
are unknowns with draws of their own.
"""

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from finback import derived, posing
from finback.problem import Problem

Array = NDArray[np.float64]

STEP = 0.01
"""Of a standard uncertainty [1], by which a length is moved to find what depends on it."""
LEAST = 1e-12
"""Change of a quantity, relative to itself [1], below which it does not depend on a length."""


def slopes(problem: Problem, z: Array) -> dict[str, Array]:
    """Return d quantity/d delta at z (p,), by name, (n_lengths,) each, delta in standard uncertainties.

    Quantities that no uncertain length moves are left out.
    """
    lengths = posing.uncertain_lengths(problem.rig)
    found: dict[str, list[float]] = {}
    for name, sd in lengths:
        at = problem.rig.geometry[name].value
        up, down = (derived.evaluate(problem, z[None], {name: at + sign * STEP * sd}) for sign in (1, -1))
        for quantity in up:
            slope = float((up[quantity] - down[quantity])[0]) / (2 * STEP)
            found.setdefault(quantity, []).append(slope)
    here = derived.evaluate(problem, z[None]) if lengths else {}
    return {
        quantity: np.array(each)
        for quantity, each in found.items()
        if np.abs(each).max() > LEAST * abs(float(here[quantity][0]))
    }


def gradients(problem: Problem, z: Array) -> dict[str, Array]:
    """Return d quantity/d z as `derived.gradients`, with lengths that are unknowns themselves."""
    found = derived.gradients(problem, z)
    own = _own_lengths(problem)
    if own is not None:
        for quantity, slope in slopes(problem, z).items():
            found[quantity][own] = slope
    return found


def moved(problem: Problem, z: Array) -> Array | None:
    """Return the lengths of draws z (n, p), in standard uncertainties off, where they are unknowns."""
    own = _own_lengths(problem)
    return None if own is None else z[:, own]


def _own_lengths(problem: Problem) -> slice | None:
    """Return where in a parameter vector lengths are that are unknowns: the last errors that are shared."""
    count = len(posing.uncertain_lengths(problem.rig))
    if not problem.candidate.heavy_tails or not count:
        return None
    return slice(problem.are_shared.stop - count, problem.are_shared.stop)


def spread(
    problem: Problem, at: Array, z: Array, values: Mapping[str, Array], random: np.random.Generator
) -> dict[str, Array]:
    """Return the quantities of draws with the lengths' own part added.

    Arguments: problem with its noise linearised; at (p,), where slopes are taken; z (n, p), the draws;
    values, their quantities (n,) by name; random.
    """
    delta = moved(problem, z)
    if delta is None and problem.by_lengths is None:
        return dict(values)
    if delta is None:
        delta = _lengths_given(problem, z, random)
    changed = {
        name: values[name] + delta @ slope for name, slope in slopes(problem, at).items() if name in values
    }
    return {**values, **changed}


def _lengths_given(problem: Problem, z: Array, random: np.random.Generator) -> Array:
    """Draw the lengths given draws z (n, p), in standard uncertainties off the stated: (n, n_lengths)."""
    by_lengths = problem.by_lengths
    assert by_lengths is not None, "there are uncertain lengths"
    noise, n = problem.noise, len(by_lengths)
    quantities = problem.values(z)
    residuals = problem.measured.values - problem.predict_values(quantities, len(z))[:, :n]
    if noise.smooth is not None:
        inverse = noise.precision(quantities.get("noise", 0.0), quantities["misfit"])
        seen_by = by_lengths.T @ inverse
        left = np.eye(by_lengths.shape[1]) - seen_by @ by_lengths
        return _normal(np.einsum("sin,sn->si", seen_by, residuals), left, random)
    sigma = np.asarray(quantities["noise"])[:, None] if noise.estimated else 0.0
    precision = 1 / np.broadcast_to(noise.variances(sigma), (len(z), n))
    seen = by_lengths.T @ noise.basis
    mean = ((residuals @ noise.basis) * precision) @ seen.T
    return _normal(mean, np.eye(len(seen)) - np.einsum("in,sn,jn->sij", seen, precision, seen), random)


def _normal(mean: Array, covariance: Array, random: np.random.Generator) -> Array:
    """Draw one normal vector for each mean (n_sets, m) and covariance (n_sets, m, m)."""
    weights, axes = np.linalg.eigh(covariance)
    normal = random.standard_normal(mean.shape) * np.sqrt(np.clip(weights, 0.0, None))
    return np.asarray(mean + np.einsum("sij,sj->si", axes, normal))
