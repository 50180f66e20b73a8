"""A law through runs with errors in both axes: against quadrature, orthogonal distances and Markov chains."""

import warnings

import numpy as np
import pytest
from scipy.stats import norm

from finback import errors_in_variables
from finback.errors import ComputationError
from finback.errors_in_variables import OUTLYING, OUTLYING_SPREAD, Fit, Points, Spread, _Target, fit
from finback.power_laws import Law, OffsetLaw, PowerLaw

C, N = 0.683, 0.466


def draw(seed: int, runs: int, sx: float = 0.12, sy: float = 0.05, scatter: float = 0.03) -> Points:
    """Draw runs of a power law over two decades."""
    random = np.random.default_rng([20, seed])
    xi = np.log(40) + random.random(runs) * np.log(100)
    x = xi + sx * random.standard_normal(runs)
    y = np.log(C) + N * xi + np.hypot(scatter, sy) * random.standard_normal(runs)
    return Points(x, y, np.full(runs, sx), np.full(runs, sy))


def draw_offset(seed: int, runs: int) -> Points:
    """Draw runs of h = 12 + 22 U^0.55 from 0.2 to 10 m/s."""
    random = np.random.default_rng([21, seed])
    xi = np.log(0.2) + random.random(runs) * np.log(50)
    x = xi + 0.1 * random.standard_normal(runs)
    y = np.log(12 + 22 * np.exp(0.55 * xi)) + 0.04 * random.standard_normal(runs)
    return Points(x, y, np.full(runs, 0.1), np.full(runs, 0.04))


def fitted(law: Law, points: Points, seed: int = 1) -> Fit:
    return fit(law, points, np.random.default_rng(seed))


def constants(found: Fit) -> dict[str, np.ndarray]:
    return dict(found.law.constants(found.draws, found.pivot))


def by_quadrature(law: Law, points: Points, z: np.ndarray, spread: Spread) -> float:
    """Return the log likelihood of one set with the true abscissae integrated on a grid."""
    *of_law, log_scatter, place, log_scale = z
    scale, total = np.exp(log_scale), 0.0
    for x, y, sx, sy in zip(points.x, points.y, points.sx, points.sy, strict=True):
        xi = np.linspace(x - 9 * sx, x + 9 * sx, 4001)
        known = sum(
            share * norm.pdf(xi, place + scale * centre, scale * spread.width)
            for centre, share in zip(spread.centres, spread.shares, strict=True)
        )
        value = law.value(np.array([of_law]), xi[None, :, None])[0, :, 0]
        error = np.hypot(sy, np.exp(log_scatter))
        regular = (1 - OUTLYING) * norm.pdf(y, value, error)  # before the runs have told the share
        outlying = OUTLYING * norm.pdf(y, value, np.hypot(error, OUTLYING_SPREAD))
        total += np.log(np.trapezoid(known * norm.pdf(x, xi, sx) * (regular + outlying), xi))
    return total


@pytest.mark.parametrize(("runs", "parts"), [(12, 1), (60, 7)])
def test_the_true_abscissae_are_integrated_out_exactly_for_a_power_law(runs: int, parts: int) -> None:
    points, law = draw(1, runs), PowerLaw()
    target = _Target(law, points)
    assert target.free
    assert len(target.spread.centres) == parts
    sets = np.array(
        [
            [np.log(C), N, np.log(0.03), target.place, np.log(target.scale)],
            [np.log(C) + 0.1, 0.43, np.log(0.08), target.place - 0.3, np.log(target.scale) + 0.2],
        ]
    )
    expected = [by_quadrature(law, points, z, target.spread) for z in sets]
    prior = law.log_prior(sets[:, :2]) + sets[:, 2] + sets[:, 4]
    assert target.log_density(sets) - prior == pytest.approx(expected, rel=1e-8)


def test_they_are_nearly_so_for_a_law_that_bends() -> None:
    points, law = draw_offset(1, 30), OffsetLaw()
    target = _Target(law, points)
    z = np.array([[np.log(34.0), 0.4, np.log(0.55), np.log(0.03), target.place, np.log(target.scale)]])
    prior = law.log_prior(z[:, :3]) + z[:, 3] + z[:, 5]
    expected = by_quadrature(law, points, z[0], target.spread)
    assert float((target.log_density(z) - prior)[0]) == pytest.approx(expected, abs=0.05)


def test_orthogonal_distance_regression_agrees_where_there_is_no_scatter() -> None:
    """P. T. Boggs, R. H. Byrd, R. B. Schnabel, SIAM J. Sci. Stat. Comput. 8 (1987) 1052, as scipy has it."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # newer scipy lets it go
        odr = pytest.importorskip("scipy.odr")
        points = draw(5, 80, sx=0.1, sy=0.04, scatter=0.0)
        data = odr.RealData(points.x, points.y, sx=points.sx, sy=points.sy)
        found = odr.ODR(data, odr.Model(lambda b, x: b[0] + b[1] * x), beta0=[0.0, 0.5]).run()
    ours = constants(fitted(PowerLaw(), points))
    slope, level = ours["n"], np.log(ours["C"])
    assert abs(slope.mean() - found.beta[1]) < 0.2 * slope.std()
    assert abs(level.mean() - found.beta[0]) < 0.2 * level.std()
    known = np.sqrt(found.cov_beta[1, 1])  # of errors as stated, without a scatter that might be
    assert 0.95 * known < slope.std() < 1.25 * known


def test_without_errors_along_x_it_is_bayesian_linear_regression() -> None:
    """With y's errors left to the scatter the exponent has Student's t about least squares."""
    points = draw(6, 30, sx=0.0, sy=0.0, scatter=0.05)
    ours = constants(fitted(PowerLaw(), points))["n"]
    (slope, _), covariance = np.polyfit(points.x, points.y, 1, cov=True)
    assert ours.mean() == pytest.approx(slope, abs=0.05 * ours.std())
    # a scatter that is even beforehand leaves 30 - 3 degrees of freedom, of which the variance takes two more
    expected = np.sqrt(covariance[0, 0] * (30 - 2) / (30 - 5))
    assert ours.std() == pytest.approx(expected, rel=0.05)


def hierarchy(law: Law, points: Points, steps: int, seed: int) -> np.ndarray:
    """Draw from the whole hierarchical model by emcee, each true abscissa an unknown of its own.

    The share of outlying runs is unknown as well. Returns draws (n, p) of the law's coordinates, ln scatter,
    place and ln scale.
    """
    import emcee

    runs, p = len(points), len(law.names)

    def log_density(block: np.ndarray) -> np.ndarray:
        z, log_scatter, place, log_scale = block[:, :p], block[:, p], block[:, p + 1], block[:, p + 2]
        odds = block[:, p + 3, None]  # of a run to be outlying, whose share has the prior 50 (1 - q)^49
        log_out, log_in = -np.log1p(np.exp(-odds)), -np.log1p(np.exp(odds))
        xi = points.x + points.sx * block[:, p + 4 :]
        z = np.where(law.allowed(z)[:, None], z, start[:p])  # weighs nothing, see below
        value = law.value(z, xi[:, :, None])[:, :, 0]
        error = np.sqrt(points.sy**2 + np.exp(2 * log_scatter)[:, None])
        wide = np.sqrt(error**2 + OUTLYING_SPREAD**2)
        away = points.y - value
        regular = log_in - 0.5 * (away / error) ** 2 - np.log(error)
        outlying = log_out - 0.5 * (away / wide) ** 2 - np.log(wide)
        known = -0.5 * ((xi - place[:, None]) / np.exp(log_scale)[:, None]) ** 2 - log_scale[:, None]
        read = -0.5 * np.square(block[:, p + 4 :])
        each = (np.logaddexp(regular, outlying) + known + read).sum(axis=1)
        share = log_out[:, 0] + (1 / OUTLYING) * log_in[:, 0]
        found = each + share + law.log_prior(z) + log_scatter + log_scale
        return np.where(np.isfinite(found) & law.allowed(block[:, :p]), found, -np.inf)

    random = np.random.default_rng(seed)
    walkers = 4 * (p + 4 + runs)
    start, root = _Target(law, points).start()
    start = np.concatenate([start, [-4.0], np.zeros(runs)])
    spread = np.concatenate([np.diag(root), np.full(1 + runs, 0.5)])
    first = start + 0.3 * spread * random.standard_normal((walkers, len(start)))
    if isinstance(law, OffsetLaw):
        first[:, 1] = 0.1 + 0.3 * random.random(walkers)
    moves = [(emcee.moves.DEMove(), 0.9), (emcee.moves.DEMove(gamma0=1.0), 0.1)]
    sampler = emcee.EnsembleSampler(walkers, len(start), log_density, vectorize=True, moves=moves)
    sampler.random_state = np.random.RandomState(seed).get_state()
    sampler.run_mcmc(first, steps)
    kept = sampler.get_chain(discard=steps // 5, thin=20)[:, :, : p + 3]
    return kept.reshape(-1, p + 3)


@pytest.mark.slow
@pytest.mark.parametrize("kind", ["power", "offset"])
def test_the_whole_hierarchy_by_markov_chain_agrees(kind: str) -> None:
    law: Law = PowerLaw() if kind == "power" else OffsetLaw()
    points = draw(3, 12) if kind == "power" else draw_offset(3, 12)
    pivot = points.x.mean()
    centred = Points(points.x - pivot, points.y, points.sx, points.sy)
    chain = hierarchy(law, centred, steps=60_000, seed=4)
    ours = fitted(law, points)
    p = len(law.names)
    for number in range(p):
        theirs, found = chain[:, number], ours.draws[:, number]
        assert abs(found.mean() - theirs.mean()) < 0.1 * theirs.std(), number
        assert found.std() == pytest.approx(theirs.std(), rel=0.05), number
    scatter = np.exp(chain[:, p])
    assert abs(ours.scatter.mean() - scatter.mean()) < 0.1 * scatter.std()
    assert ours.scatter.std() == pytest.approx(scatter.std(), rel=0.05)


def test_ignoring_the_errors_of_x_draws_the_exponent_towards_zero() -> None:
    runs, sx = 5200, 0.3
    points = draw(7, runs, sx=sx)
    with_errors = constants(fitted(PowerLaw(), points))["n"]
    without = constants(fitted(PowerLaw(), Points(points.x, points.y, 0 * points.sx, points.sy)))["n"]
    share = sx**2 / points.x.var()  # Fuller, section 1.1.1: the slope shrinks by the share of errors in x
    assert without.mean() == pytest.approx(N * (1 - share), abs=4 * without.std())
    assert without.mean() < N - 5 * without.std()
    assert with_errors.mean() == pytest.approx(N, abs=3 * with_errors.std())


def test_errors_that_grow_to_low_x_do_not_bend_the_law() -> None:
    """As of an anemometer with an error in m/s; one normal distribution of the abscissae would not do."""
    scores = []
    campaigns = 9
    for seed in range(campaigns):
        points = draw(30 + seed, 600)
        random = np.random.default_rng([22, seed])
        sx = 0.02 + 0.28 * np.exp(-(points.x - points.x.min()) / 1.5)
        xi = points.x
        moved = Points(xi + sx * random.standard_normal(len(xi)), points.y, np.hypot(0.12, sx), points.sy)
        n = constants(fitted(PowerLaw(), moved))["n"]
        scores.append((n.mean() - N) / n.std())
    assert abs(np.mean(scores)) < 3 / np.sqrt(campaigns)


def test_a_run_that_is_wrong_is_named_and_hardly_moves_the_law() -> None:
    points = draw(8, 30)
    spoilt = points.y.copy()
    spoilt[11] += np.log(1.6)
    clean, found = (
        fitted(PowerLaw(), points),
        fitted(PowerLaw(), Points(points.x, spoilt, points.sx, points.sy)),
    )
    assert found.outlying[11] > 0.95
    assert np.delete(found.outlying, 11).max() < 0.5
    assert np.exp(found.residual[11] - clean.residual[11]) == pytest.approx(1.6, rel=0.05)
    before, after = constants(clean)["n"], constants(found)["n"]
    assert abs(after.mean() - before.mean()) < before.std()


def test_of_many_runs_the_share_of_outlying_ones_is_learnt() -> None:
    clean = draw(13, 4000)
    assert (fitted(PowerLaw(), clean).outlying > 0.5).sum() <= 1
    random = np.random.default_rng([24])
    wrong = random.random(4000) < 0.1
    y = np.where(wrong, clean.y + OUTLYING_SPREAD * random.standard_normal(4000), clean.y)
    found = fitted(PowerLaw(), Points(clean.x, y, clean.sx, clean.sy)).outlying
    assert found.mean() == pytest.approx(wrong.mean(), rel=0.1)
    assert wrong[found > 0.9].mean() > 0.98


def test_hardly_a_run_is_named_where_none_is_wrong() -> None:
    named = [int((fitted(PowerLaw(), draw(100 + seed, 30)).outlying > 0.5).sum()) for seed in range(25)]
    assert sum(named) <= 4  # of 750 runs


def some(law: Law, n: int, random: np.random.Generator) -> np.ndarray:
    """Return coordinates (n, p) of laws that can be."""
    z = 0.4 * random.normal(size=(n, len(law.names)))
    if isinstance(law, OffsetLaw):
        z[:, 1] = random.random(n)
    assert law.allowed(z).all()
    return z


@pytest.mark.parametrize("law", [PowerLaw(), OffsetLaw()])
def test_a_law_moved_is_the_law_at_a_place_beside(law: Law) -> None:
    random = np.random.default_rng(9)
    z = some(law, 40, random)
    along, up = random.normal(size=40) * 0.2, random.normal(size=40) * 0.2
    xi = np.linspace(-2, 2, 9)
    moved = law.value(law.moved(z, along, up), xi[None, :, None])[:, :, 0]
    expected = law.value(z, (xi[None] - along[:, None])[:, :, None])[:, :, 0] + up[:, None]
    assert moved == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize("law", [PowerLaw(), OffsetLaw()])
def test_slopes_are_those_of_the_values(law: Law) -> None:
    z = some(law, 20, np.random.default_rng(10))
    xi = np.linspace(-2, 2, 9)[None, :, None]
    step = 1e-6
    slope = (law.value(z, xi + step) - law.value(z, xi - step)) / (2 * step)
    assert np.broadcast_to(law.slope(z, xi), slope.shape) == pytest.approx(slope, abs=1e-8)


def test_many_runs_take_the_way_of_few(monkeypatch: pytest.MonkeyPatch) -> None:
    """Weighed draws of a thousand runs and a normal posterior of one more are the same but for a run."""
    monkeypatch.setattr(errors_in_variables, "WEIGHED_UP_TO", 1000)
    points = draw(11, 1001)
    few = Points(*(each[:1000] for each in (points.x, points.y, points.sx, points.sy)))
    weighed, normal = fitted(PowerLaw(), few), fitted(PowerLaw(), points)
    assert weighed.khat is not None
    assert normal.khat is None
    one, other = constants(weighed)["n"], constants(normal)["n"]
    assert abs(one.mean() - other.mean()) < 0.15 * one.std()
    assert other.std() == pytest.approx(one.std(), rel=0.05)


def test_an_offset_near_nothing_is_told_alike_by_every_seed() -> None:
    random = np.random.default_rng([23])
    x = np.log(np.geomspace(0.12, 7.0, 24))
    y = np.log(36.0) + 0.466 * x + 0.03 * random.standard_normal(24)
    points = Points(x, y, np.full(24, 0.05), np.full(24, 0.03))
    found = [constants(fitted(OffsetLaw(), points, seed))["a"] for seed in range(4)]
    assert all((a >= 0).all() for a in found)
    means, sd = [a.mean() for a in found], found[0].std()
    assert np.ptp(means) < 0.1 * sd


def test_a_law_that_no_offset_bends_enough_is_told_with_what_to_do() -> None:
    x = np.linspace(-1.5, 1.5, 30)
    y = 0.5 * x - 0.15 * x**2
    points = Points(x, y + 0.002 * np.sin(50 * x), np.full(30, 1e-3), np.full(30, 2e-3))
    fine = fitted(OffsetLaw(), Points(x, 0.5 * x + 0.01 * np.sin(50 * x), points.sx, points.sy))
    assert float(np.median(constants(fine)["a"])) < 0.1
    with pytest.raises(ComputationError, match="less and less steeply"):
        fitted(OffsetLaw(), points)


def test_the_same_seed_gives_the_same_draws() -> None:
    points = draw(12, 20)
    assert np.array_equal(fitted(PowerLaw(), points).draws, fitted(PowerLaw(), points).draws)
