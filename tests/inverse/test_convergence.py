"""Honesty about convergence: chains that have not converged, made by the hundred, and none is called so.

Every kind stands for something that happens to samplers: walkers that never move, ensembles in a mode each,
a drift, a chain that forgets too slowly for its length, one ensemble with another width.
"""

from collections.abc import Callable

import numpy as np
import pytest

from finback.sampling import Settings, judge

ENSEMBLES, WALKERS, UNKNOWNS = 4, 16, 3
SETTINGS = Settings()
EACH = 20  # of each kind: 200 in all, and as many again that are fine

Maker = Callable[[np.random.Generator], np.ndarray]


def independent(rng: np.random.Generator, steps: int = 300) -> np.ndarray:
    return rng.standard_normal((ENSEMBLES, steps, WALKERS, UNKNOWNS))


def slow(rng: np.random.Generator, memory: float, steps: int = 300) -> np.ndarray:
    """Autoregressive draws, whose autocorrelation time is (1 + memory)/(1 - memory)."""
    z = independent(rng, steps)
    for step in range(1, steps):
        z[:, step] = memory * z[:, step - 1] + np.sqrt(1 - memory**2) * z[:, step]
    return z


def frozen(rng: np.random.Generator) -> np.ndarray:
    return np.repeat(independent(rng, 1), 300, axis=1)


def one_frozen_unknown(rng: np.random.Generator) -> np.ndarray:
    z = independent(rng)
    z[..., 1] = z[:, :1, :, 1]
    return z


def nearly_stuck(rng: np.random.Generator) -> np.ndarray:
    """Walkers that move once in a hundred steps."""
    z = independent(rng)
    stays = rng.random((ENSEMBLES, 300, WALKERS)) > 0.01
    for step in range(1, 300):
        z[:, step] = np.where(stays[:, step, :, None], z[:, step - 1], z[:, step])
    return z


def a_mode_each(rng: np.random.Generator) -> np.ndarray:
    z = independent(rng)
    z[:2, ..., 0] += 6.0
    return z


def modes_that_walkers_keep(rng: np.random.Generator) -> np.ndarray:
    """Every ensemble has walkers in both modes, but not the same number, and none changes over."""
    z = independent(rng)
    far = rng.random((ENSEMBLES, 1, WALKERS)) < rng.uniform(0.2, 0.8)
    z[..., 2] += 8.0 * far
    return z


def modes_seldom_changed(rng: np.random.Generator) -> np.ndarray:
    z = independent(rng)
    changes = rng.random((ENSEMBLES, 300, WALKERS)) < 0.005
    z[..., 0] += 8.0 * (np.cumsum(changes, axis=1) % 2)
    return z


def drifting(rng: np.random.Generator) -> np.ndarray:
    z = independent(rng)
    z[..., 1] += np.linspace(0.0, rng.uniform(2.0, 4.0), 300)[:, None]
    return z


def forgetting_slowly(rng: np.random.Generator) -> np.ndarray:
    return slow(rng, 0.9)  # 19 steps, 50 times which are more than it has


def too_short(rng: np.random.Generator) -> np.ndarray:
    return slow(rng, 0.5, steps=60)


def one_wide(rng: np.random.Generator) -> np.ndarray:
    z = independent(rng)
    z[3] *= 2.5
    return z


BAD: tuple[Maker, ...] = (
    frozen, one_frozen_unknown, nearly_stuck, a_mode_each, modes_that_walkers_keep, modes_seldom_changed,
    drifting, forgetting_slowly, too_short, one_wide,
)  # fmt: skip


@pytest.mark.parametrize("make", BAD, ids=lambda make: make.__name__)
def test_no_chain_that_has_not_converged_is_called_so(make: Maker) -> None:
    called = [judge(make(np.random.default_rng([31, n])), SETTINGS).converged for n in range(EACH)]
    assert not any(called)


def test_two_hundred_are_judged() -> None:
    assert len(BAD) * EACH == 200


@pytest.mark.parametrize("memory", [0.0, 0.5])
def test_chains_that_have_converged_are_called_so(memory: float) -> None:
    chains = (slow(np.random.default_rng([32, n]), memory) for n in range(EACH))
    assert sum(judge(z, SETTINGS).converged for z in chains) >= EACH - 1
