"""The lattice: built again from its criterion, and as good as scipy's Sobol points."""

import numpy as np
from scipy.stats import norm, qmc

from finback import lattice
from finback.lattice import POINTS, VECTOR, worst_case


def test_every_component_is_the_best_addition_to_those_before() -> None:
    for d in (2, 4, 7):
        own = worst_case(VECTOR[:d])
        others = [x for x in range(1, POINTS // 2, 2) if x not in VECTOR[: d - 1]]
        tried = np.random.default_rng(d).choice(others, 150, replace=False)
        assert own <= min(worst_case(np.append(VECTOR[: d - 1], x)) for x in tried) + 1e-12


def test_each_coordinate_is_even_and_inside() -> None:
    points = lattice.draw(2, 26, np.random.default_rng(1))
    assert points.shape == (2 * POINTS, 26)
    assert 0 < points.min() <= points.max() < 1
    for block in np.split(points[:, :24], 2):
        gaps = np.diff(np.sort(block, axis=0), axis=0)
        np.testing.assert_allclose(gaps, 1 / POINTS, rtol=1e-9)
    assert np.unique(points[:, 25]).size == 2 * POINTS  # beyond the lattice: random numbers


def test_means_are_as_close_as_sobols_and_unbiased() -> None:
    def mean(points: np.ndarray) -> float:
        # normal numbers of a smooth function that fades out in their tails, as weights do
        x = norm.ppf(points)
        return float(np.prod(1 + (x + 0.5) * np.exp(-0.5 * x * x), axis=1).mean())

    exact = (1 + 0.5 / np.sqrt(2)) ** 6
    ours = np.array([mean(lattice.draw(1, 6, np.random.default_rng(s))) for s in range(40)])
    sobol = np.array([mean(qmc.Sobol(6, seed=s).random(POINTS)) for s in range(40)])
    plain = np.array([mean(np.random.default_rng(s).random((POINTS, 6))) for s in range(40)])
    assert abs(ours.mean() - exact) < 4 * ours.std() / np.sqrt(40)
    assert ours.std() < 2 * sobol.std()
    assert ours.std() < plain.std() / 4
