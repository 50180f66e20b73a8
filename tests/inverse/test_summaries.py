"""Averages over candidates: shares, spread, and what only some candidates have."""

from types import SimpleNamespace

import numpy as np
import pytest

from finback import summaries
from finback.parameters import DEFAULT_PRIORS, ZERO_CELSIUS


def outcome(chains: int, n: int) -> SimpleNamespace:
    """As much of an outcome as averaging looks at."""
    return SimpleNamespace(draws=np.zeros((chains, n, 2)))


def quantities(centre: float, n: int, seed: int, **more: float) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(seed)
    return {"h": rng.normal(centre, 1.0, n)} | {name: np.full(n, value) for name, value in more.items()}


@pytest.mark.parametrize("weights", [(0.5, 0.5), (0.9, 0.1), (0.999, 0.001), (1.0, 0.0)])
def test_each_candidate_adds_draws_by_its_probability(weights: tuple[float, float]) -> None:
    outcomes = [outcome(4, 2500), outcome(1, 2000)]
    evaluated = [quantities(10.0, 10_000, 1), quantities(20.0, 2000, 2)]
    found = summaries.mix(outcomes, np.array(weights), evaluated)
    share = (found.which == 1).mean()
    assert share == pytest.approx(weights[1], abs=1e-3)
    assert found.values["h"].shape == (4, 2500)
    mean = weights @ np.array([10.0, 20.0])
    assert found.values["h"].mean() == pytest.approx(mean, abs=0.1)
    variance = 1.0 + weights[0] * weights[1] * 100.0  # within and between
    assert found.values["h"].var() == pytest.approx(variance, rel=0.1)


def test_a_draw_can_be_traced_to_its_candidate_and_place() -> None:
    outcomes = [outcome(2, 100), outcome(1, 60)]
    evaluated = [{"h": np.arange(200.0)}, {"h": 1000 + np.arange(60.0)}]
    found = summaries.mix(outcomes, np.array([0.7, 0.3]), evaluated)
    for which, index, value in zip(
        found.which.ravel(), found.index.ravel(), found.values["h"].ravel(), strict=True
    ):
        assert evaluated[which]["h"][index] == value
    first = found.index[:, found.which[0] == 0]
    assert (first[0] < 100).all()
    assert (first[1] >= 100).all()  # each chain from its own ensemble


def test_what_a_candidate_does_not_have_is_not_a_number_in_its_draws() -> None:
    outcomes = [outcome(4, 100), outcome(4, 100)]
    evaluated = [quantities(1.0, 400, 1, joint=3.0), quantities(1.0, 400, 2)]
    found = summaries.mix(outcomes, np.array([0.6, 0.4]), evaluated).values["joint"]
    assert np.isnan(found).mean() == pytest.approx(0.4)
    assert np.nanmean(found) == 3.0


def test_every_quantity_is_described() -> None:
    for name in (*DEFAULT_PRIORS, "h_over_k", "m", "joint_times_k", "heat", "efficiency"):
        label, unit = summaries.describe(name)
        assert label
        assert unit
    assert summaries.to_reported("base_temperature", np.array([ZERO_CELSIUS]))[0] == 0.0
    assert summaries.to_reported("plate", np.array([ZERO_CELSIUS]))[0] == 0.0
    assert summaries.to_reported("joint", np.array([5e-5]))[0] == 5e-5
