"""A law through runs whose both coordinates have errors: its posterior, with scatter and outlying runs.

The true abscissa of each run is an unknown that is integrated out, in closed form: it has a distribution of
its own over the runs, a sum of normal ones whose place and width are unknowns beside the law's. Leaving
that distribution out, or the errors of x, draws every exponent towards zero.
Sources: W. A. Fuller, Measurement Error Models (Wiley 1987), sections 1.2 and 3.1, the structural model;
B. C. Kelly, Astrophys. J. 665 (2007) 1489, its posterior with scatter; G. E. P. Box, G. C. Tiao, Biometrika
55 (1968) 119, outlying runs as a second, wider normal distribution. Formulas: README.md of this folder.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback import fast, laplace, proposal
from finback.errors import ComputationError
from finback.laplace import Mode
from finback.power_laws import Law

Array = NDArray[np.float64]

LEAST_RUNS = 5
"""Runs from which a law with scatter is fitted."""

OUTLYING = 0.02
"""Share of runs that is taken beforehand to be outlying: one in fifty, as surely as fifty runs tell it."""

OUTLYING_SPREAD = float(np.log(2.0))
"""Standard deviation in ln y that an outlying run has in addition: it is wrong by a factor of two."""

SHAPED_FROM = 40
"""Runs from which the abscissae tell more than the place and the width of their distribution."""

MOST_PARTS = 7
"""Normal distributions that are added up for the abscissae, at most."""

PART_WIDTH = 0.7
"""Standard deviation of such a part over the distance to the next."""

WIDEST_ERROR = 3.0
"""Parts stand apart by so many standard errors of x at least: closer ones cannot be told apart."""

SETTLED_FROM = 300
"""Runs from which the distribution of the abscissae counts as known: it is then known within 8 % in variance,
which is a small part of what the errors of x do."""

WEIGHED_UP_TO = 5000
"""Runs up to which draws are weighed; a posterior of more is taken as normal about its mode, with an error of
the order of one over the number of runs."""

ROUNDS, SETTLED = 6, 0.05
"""Rounds in which the share of outlying runs is looked for, and the relative change that ends them."""

STEPS = 300
"""Rounds of expectation and maximisation."""

PIECE = 2**14
"""Numbers at a time, which stay in the processor's cache."""

MORE_DRAWS = 4 * fast.DRAWS
"""Draws where a part of the proposal is of laws that cannot be."""

LEAST_POSSIBLE = 0.1
"""Share of a proposal that has to be of laws that can be."""

RARE_DRAWS = 200_000
"""Draws among which those few are looked for."""

NO_SUCH_LAW = (
    "h rises less and less steeply with the speed, as no a + b U^n with a from 0 up does; fit Nu = C Re^n "
    "instead, with --rig."
)

JUDGING_DRAWS = 256
"""Draws over which the probability of being outlying is averaged."""

LOG_2PI = float(np.log(2 * np.pi))


@dataclass(frozen=True)
class Points:
    """The runs in logarithms: x, y, and their standard errors sx, sy, all (n,); errors independent."""

    x: Array
    y: Array
    sx: Array
    sy: Array

    def __len__(self) -> int:
        return len(self.x)


@dataclass(frozen=True)
class Spread:
    """How true abscissae are distributed: normal parts at `centres`, all of one `width`, with `shares`.

    In units of a place and a scale that are unknowns: (c,), a number, (c,).
    """

    centres: Array
    width: float
    shares: Array


@dataclass(frozen=True)
class Fit:
    """The posterior of a law.

    `draws` (n, p), all of one weight, of the law's coordinates about `pivot`; `scatter` (n,), the standard
    deviation in ln y that the runs have beside their errors; of each run `outlying` (runs,), the probability
    that it does not belong, `residual` (runs,) in ln y, and `deviation` (runs,), the residual over its
    standard deviation. `khat` says whether the draws are to be trusted, below 0.7; None where the posterior
    is taken as normal.
    """

    law: Law
    pivot: float
    draws: Array
    scatter: Array
    outlying: Array
    residual: Array
    deviation: Array
    khat: float | None

    def log_values(self, x: Array) -> Array:
        """Return ln y (n_draws, len(x)) of the law at logarithms x of true abscissae."""
        return self.law.value(self.draws, (x - self.pivot)[None, :, None])[:, :, 0]


def fit(law: Law, points: Points, random: np.random.Generator) -> Fit:
    """Return the posterior of a law through runs.

    Arguments: law; points, at least LEAST_RUNS of different x; random.
    """
    pivot = float(points.x.mean())
    centred = Points(points.x - pivot, points.y, points.sx, points.sy)
    target = _Target(law, centred)
    start, root = target.start()
    few = _thinned(centred, random)
    if few is not None:  # most of the way on a few thousand runs
        some = _Target(law, few, target.settled)
        near = some.settle(start, root)
        target.outlying = some.outlying
        start, root = near.z, near.root * np.sqrt(len(few) / len(points))
    mode = target.settle(start, root)
    if len(points) > WEIGHED_UP_TO:
        z, khat = _normal_draws(target, mode, random), None
    else:
        z, khat = _weighed_draws(target, mode, pivot, random)
    z = random.permutation(z)
    outlying, residual, deviation = target.judge(z)
    scatter = np.exp(z[:, target.of_law])
    return Fit(law, pivot, z[:, : target.of_law], scatter, outlying, residual, deviation, khat)


def _normal_draws(target: "_Target", mode: Mode, random: np.random.Generator) -> Array:
    """Return draws of the normal distribution about a mode, those of laws that can be."""
    z = mode.z + random.standard_normal((fast.DRAWS, len(mode.z))) @ mode.root.T
    good = np.flatnonzero(target.allowed(z))
    if not good.size:
        raise ComputationError(NO_SUCH_LAW)
    return z if good.size == len(z) else z[random.choice(good, len(z))]


def _weighed_draws(
    target: "_Target", mode: Mode, pivot: float, random: np.random.Generator
) -> tuple[Array, float]:
    """Return draws of the posterior and their k-hat.

    The proposal is fitted without regard to what a law can be, where the posterior is most regular; where
    next to nothing of it can, once more with it.
    """
    generator = np.random.RandomState(random.integers(2**31))

    def possible(z: Array) -> Array:
        return np.where(target.allowed(z), target.log_density(z), -np.inf)

    fitted, _ = proposal.adapt(target.log_density, proposal.from_mode(mode), generator)
    share = float(target.allowed(fitted.draw(fast.DRAWS, generator)).mean())
    if share < LEAST_POSSIBLE:
        z = fitted.draw(RARE_DRAWS, generator)
        z = z[target.allowed(z)]
        if len(z) <= 2 * z.shape[1]:
            raise ComputationError(NO_SUCH_LAW)
        fitted, _ = proposal.adapt(possible, proposal.from_draws(z), generator)
    draws = fast.DRAWS if share == 1 else MORE_DRAWS
    posterior = fast.sample(possible, fitted, random, draws)
    khat = float(posterior.khat_of(_reported(target.law, posterior.z, pivot)).max())
    return posterior.z[posterior.resample(fast.DRAWS, random)], khat


def _reported(law: Law, z: Array, pivot: float) -> Array:
    """Return what is reported of draws: the law's constants, and the level at the pivot, (n, m)."""
    of_law = z[:, : len(law.names)]
    return np.stack([*law.constants(of_law, pivot).values(), of_law[:, 0]], axis=1)


def _thinned(points: Points, random: np.random.Generator) -> Points | None:
    """Return a few of many runs, None where there are few."""
    if len(points) <= 4 * WEIGHED_UP_TO:
        return None
    chosen = random.choice(len(points), WEIGHED_UP_TO, replace=False)
    return Points(points.x[chosen], points.y[chosen], points.sx[chosen], points.sy[chosen])


class _Target:
    """The posterior of law, scatter and, where it is not settled, place and scale of the abscissae.

    z: the law's coordinates, ln of the scatter, then place and ln of the scale. Scatter and scale are even
    beforehand, so that their logarithms count.
    """

    def __init__(self, law: Law, points: Points, settled: tuple[Spread, float, float] | None = None) -> None:
        self.law, self.points = law, points
        self.of_law = len(law.names)
        self.outlying = OUTLYING
        self.exact = not points.sx.any()
        spread, place, scale = _spread(points) if settled is None else settled
        self.spread, self.place, self.scale = spread, place, scale
        self.free = not self.exact and len(points) < SETTLED_FROM and settled is None
        self.moments = None if self.free else self._moments()

    @property
    def settled(self) -> tuple[Spread, float, float]:
        """How the abscissae are distributed, as it was found at first."""
        return self.spread, self.place, self.scale

    def _moments(self) -> tuple[Array, Array]:
        """Return mean and variance (runs,) of each true abscissa given what was read for it."""
        if self.exact:
            return self.points.x, np.zeros_like(self.points.x)
        pieces = [self._moments_of(slice(i, i + PIECE)) for i in range(0, len(self.points), PIECE)]
        means, variances = zip(*pieces, strict=True)
        return np.concatenate(means), np.concatenate(variances)

    def _moments_of(self, some: slice) -> tuple[Array, Array]:
        place, scale = np.array([self.place]), np.array([self.scale])
        logs, means, variance = self._parts(place, scale, some)
        weights = np.exp(logs - logs.max(axis=2, keepdims=True))
        weights /= weights.sum(axis=2, keepdims=True)
        mean = (weights * means).sum(axis=2)
        between = (weights * np.square(means - mean[:, :, None])).sum(axis=2)
        return mean[0], variance[0, :, 0] + between[0]

    def _parts(self, place: Array, scale: Array, some: slice) -> tuple[Array, Array, Array]:
        """Return log weight, mean and variance of true abscissae; (n_sets, runs, parts), variance (, , 1)."""
        x, sx2 = self.points.x[some, None], np.square(self.points.sx[some, None])
        centres = place[:, None, None] + scale[:, None, None] * self.spread.centres
        own = np.square(scale[:, None, None] * self.spread.width)
        total = own + sx2
        away = x - centres
        logs = np.log(self.spread.shares) - 0.5 * (np.square(away) / total + np.log(total) + LOG_2PI)
        kept = own / total
        return logs, centres + kept * away, kept * sx2

    def allowed(self, z: Array) -> NDArray[np.bool_]:
        """Tell which of the sets (n_sets, p) hold a law that can be."""
        return self.law.allowed(z[:, : self.of_law])

    def start(self) -> tuple[Array, Array]:
        """Return where to start, at the best of the law's starts, and a guess of the scale."""
        x, y = self.points.x, self.points.y
        slope, level, noise = _robust_line(x, y)
        stated = float(np.mean(np.square(self.points.sy) + np.square(slope * self.points.sx)))
        scatter = np.sqrt(max(noise**2 - stated, 0.1 * noise**2, 1e-10))
        laws = self.law.starts(level, slope)
        others = [np.log(scatter), *((self.place, np.log(self.scale)) if self.free else ())]
        tried = np.concatenate([laws, np.tile(others, (len(laws), 1))], axis=1)
        best = tried[int(np.argmax(self.log_density(tried)))]
        error = max(noise, 1e-4) / np.sqrt(len(x))
        lengths = [error, *[error / max(float(x.std()), 1e-3)] * (self.of_law - 1), 0.5]
        lengths += [self.scale / np.sqrt(len(x)), 1 / np.sqrt(2 * len(x))] if self.free else []
        return best, np.diag(lengths)

    def settle(self, start: Array, root: Array) -> Mode:
        """Return the mode, once the share of outlying runs is what the runs and its prior make it.

        Expectation and maximisation: the share is the mean of its posterior given each run's probability.
        """
        mode = laplace.find_mode(self.log_density, start, root)
        for _ in range(ROUNDS):
            before = self.outlying
            expected = float(self.judge(mode.z[None])[0].sum())
            self.outlying = (1 + expected) / (len(self.points) + 1 / OUTLYING)
            mode = laplace.find_mode(self.log_density, mode.z, mode.root)
            if abs(self.outlying / before - 1) < SETTLED:
                break
        return mode

    def log_density(self, z: Array) -> Array:
        """Return the log density of a block (n_sets, p) -> (n_sets,)."""
        n, parts = len(self.points), len(self.spread.centres) if self.free else 1
        sets = max(1, PIECE // (n * parts))
        runs = max(1, PIECE // parts)
        found = self.law.log_prior(z[:, : self.of_law]) + z[:, self.of_law]
        if self.free:
            found = found + z[:, -1]
        for i in range(0, len(z), sets):
            some = slice(i, i + sets)
            for j in range(0, n, runs):
                found[some] += self._log_likelihood(z[some], slice(j, j + runs)).sum(axis=1)
        return np.where(np.isfinite(found), found, -np.inf)

    def _log_likelihood(self, z: Array, some: slice) -> Array:
        """Return the log likelihood of each run (n_sets, runs)."""
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):  # far from the mode
            logs, regular, outlying = self._terms(z, some)
            both: Array = logs + np.logaddexp(regular, outlying)
            if both.shape[2] == 1:
                return both[:, :, 0]
            highest = both.max(axis=2)
            total: Array = highest + np.log(np.exp(both - highest[:, :, None]).sum(axis=2))
            return total

    def _terms(self, z: Array, some: slice) -> tuple[Array, Array, Array]:
        """Return log weights of the parts, and the log densities of y, regular and outlying."""
        logs, value, variance = self._predicted(z, some)
        squares = np.square(self.points.y[some, None] - value)
        wide = variance + OUTLYING_SPREAD**2
        regular = np.log1p(-self.outlying) - 0.5 * (squares / variance + np.log(variance) + LOG_2PI)
        outlying = np.log(self.outlying) - 0.5 * (squares / wide + np.log(wide) + LOG_2PI)
        return logs, regular, outlying

    def _predicted(self, z: Array, some: slice) -> tuple[Array, Array, Array]:
        """Return log weights of the parts, and mean and variance of ln y given what was read for x.

        A law that bends is taken as straight over the errors of one run, about its mean abscissa.
        """
        if self.moments is None:
            logs, mean, spread = self._parts(z[:, -2], np.exp(z[:, -1]), some)
        else:
            mean, spread = self.moments[0][None, some, None], self.moments[1][None, some, None]
            logs = np.zeros((1, 1, 1))
        law = z[:, : self.of_law]
        slope = self.law.slope(law, mean)
        scatter = np.exp(2 * z[:, self.of_law])[:, None, None]
        variance = np.square(slope) * spread + np.square(self.points.sy[some, None]) + scatter
        return logs, self.law.value(law, mean), variance

    def judge(self, z: Array) -> tuple[Array, Array, Array]:
        """Return probability of being outlying, residual in ln y and its share of its standard deviation."""
        n = len(self.points)
        z = z[: max(8, min(JUDGING_DRAWS, 64 * PIECE // n))]
        outlying, residual, deviation = np.zeros(n), np.zeros(n), np.zeros(n)
        runs = PIECE // 8
        for j in range(0, n, runs):
            some = slice(j, j + runs)
            for one in np.array_split(z, max(1, len(z) * min(n, runs) // PIECE)):
                share, away, over = self._judged(one, some)
                outlying[some] += share.sum(axis=0) / len(z)
                residual[some] += away.sum(axis=0) / len(z)
                deviation[some] += over.sum(axis=0) / len(z)
        return outlying, residual, deviation

    def _judged(self, z: Array, some: slice) -> tuple[Array, Array, Array]:
        """Return of each set and run the probability of being outlying, the residual and its deviation."""
        logs, regular, outlying = self._terms(z, some)
        _, value, variance = self._predicted(z, some)
        highest = (logs + np.maximum(regular, outlying)).max(axis=2, keepdims=True)
        both = np.exp(logs + regular - highest), np.exp(logs + outlying - highest)
        share = both[1].sum(axis=2) / (both[0] + both[1]).sum(axis=2)
        weights = np.exp(logs - logs.max(axis=2, keepdims=True))
        weights = weights / weights.sum(axis=2, keepdims=True)
        mean = (weights * value).sum(axis=2)
        spread = (weights * (variance + np.square(value - mean[:, :, None]))).sum(axis=2)
        away = self.points.y[some] - mean
        return share, away, away / np.sqrt(spread)


def _robust_line(x: Array, y: Array) -> tuple[float, float, float]:
    """Return slope, level at x = 0 and spread of y about a line through most runs.

    The median of the slopes of pairs (Theil and Sen; P. K. Sen, J. Am. Stat. Assoc. 63 (1968) 1379), of runs
    a third of the range apart.
    """
    order = np.argsort(x)[np.linspace(0, len(x) - 1, min(len(x), 300)).astype(int)]
    a, b = np.triu_indices(len(order), 1)
    run, rise = x[order][b] - x[order][a], y[order][b] - y[order][a]
    apart = run >= min((x[order][-1] - x[order][0]) / 3, float(run.max()))
    slope = float(np.median(rise[apart] / run[apart]))
    level = float(np.median(y - slope * x))
    noise = 1.4826 * float(np.median(np.abs(y - slope * x - level)))
    return slope, level, noise


def _spread(points: Points) -> tuple[Spread, float, float]:
    """Return how the true abscissae are distributed, with the place and the scale that go with it.

    One normal distribution for few runs; for more, parts on a grid, with the shares that make what was read
    most probable (expectation and maximisation, with each part's share drawn to the others' by one run).
    """
    x, sx = points.x, points.sx
    place = float(x.mean())
    own = float(x.var() - np.mean(np.square(sx)))
    scale = float(np.sqrt(max(own, 0.05 * x.var(), 1e-12)))
    if len(x) > WEIGHED_UP_TO:  # so many tell as much as all
        chosen = np.linspace(0, len(x) - 1, WEIGHED_UP_TO).astype(int)
        x, sx = x[chosen], sx[chosen]
    reach = float(np.ptp(np.quantile(x, (0.005, 0.995))))
    apart = max(reach / (MOST_PARTS - 1), WIDEST_ERROR * float(np.sqrt(np.mean(np.square(sx)))))
    parts = 1 + int(reach / apart)
    if len(x) < SHAPED_FROM or parts < 3:
        return Spread(np.zeros(1), 1.0, np.ones(1)), place, scale
    middle = float(np.mean(np.quantile(x, (0.005, 0.995))))
    centres = middle + apart * (np.arange(parts, dtype=np.float64) - (parts - 1) / 2)
    width = PART_WIDTH * apart
    total = width**2 + np.square(sx)[:, None]
    heights = np.exp(-0.5 * np.square(x[:, None] - centres) / total) / np.sqrt(total)
    shares = np.full(parts, 1 / parts)
    for _ in range(STEPS):
        weights = shares * heights + 1e-300
        weights /= weights.sum(axis=1, keepdims=True)
        shares = (weights.sum(axis=0) + 1 / parts) / (len(x) + 1)
    middle = float(shares @ centres)
    found = float(np.sqrt(shares @ np.square(centres - middle) + width**2))
    # parts on a grid are a little too wide in all: the scale makes the variance right, which counts most
    return Spread(np.asarray((centres - middle) / found), width / found, shares), place, scale
