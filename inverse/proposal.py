"""A heavy-tailed proposal fitted to a posterior: a multivariate Student t, or several side by side.

It starts at the posterior's mode. Where the posterior is bent or skewed, such as that of h and an air
temperature nobody read, of h and an emissivity, or of a joint that is too good to be seen, a ladder takes its
place: one unknown is followed to both ends, and a component stands on every rung, where the others are most
probable given that unknown. One that is a funnel, as wide in the others as an estimated noise is large, gets
its ladder along the noise. What still fits badly is fitted again to its own weighted draws.
Source of the refitting: Cappé, Guillin, Marin, Robert, J. Comp. Graph. Stat. 13 (2004) 907, population Monte
Carlo; the largest weights are cut, so that no single draw decides.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache, cached_property

import numpy as np
from numpy.typing import NDArray

from finback import cubics, laplace
from finback.laplace import LogDensity, Mode

Array = NDArray[np.float64]

FREEDOM = 8.0  # tails heavy enough for a posterior with an estimated noise, light enough to be accepted
COMPONENTS = (1, 1, 1, 4, 4, 8, 8)  # tried one after the other, until one is good
DRAWS = 2000  # a trial
PIECE = 2**15  # numbers at a time
FEW_DRAWS = 500  # a trial of what differs much
LARGEST = 500.0  # exponent of a ratio, short of an overflow
GOOD = 0.7  # efficiency from which refitting is not worth its time
CUT = 10  # weights above the tenth largest count as much as that one
WIDER = 1.1  # of the fitted variances: a proposal had better be too wide
TAILS = 2.0  # width of one more component over all of them, for what lies beyond their ends
OVERLAP = 0.5  # of its neighbours' shares that a component is fitted to as well
SMALLEST_SPREAD = 1e-12  # of a correlation matrix: draws in a plane still give a proposal
RUNG = 0.5  # step of a ladder, in the logarithm of the noise
RUNGS = 60  # at most, up or down
FAINT = 12.0  # nats below the best rung, where a ladder ends
NEAR = 1e-2  # Newton decrement [nats] of a rung, which is a place to draw about and no result
STRAIGHT = 0.3  # of the others' standard deviations, that they may bend over one component
EVEN = 0.2  # of their logarithm, that they may widen over one component
PARTS = 8  # components a rung, at most
SMALLEST_SHARE = 1e-5  # of a component: what lies beyond is left to the tails of the others
LOOKS = np.array([-3.0, -1.5, 1.5, 3.0])  # standard deviations from the mode, where a bend would show
BENT = 5.0  # nats off a normal distribution, over these looks, from which a posterior needs a ladder
ALIKE = 0.3  # of the largest bend: a second unknown to try a ladder along
STRIDE = 0.7  # standard deviations from component to component
SLACK = 0.9  # of that: a step just as long as it should be is not halved


@dataclass(frozen=True)
class Proposal:
    """Multivariate Student t's side by side.

    Arguments: centres (c, p); roots (c, p, p), with scale matrices root @ root.T; shares (c,), their
    probabilities, all the same if left out.
    """

    centres: Array
    roots: Array
    shares: Array | None = None

    @cached_property
    def _inverses(self) -> Array:
        return np.asarray(np.linalg.inv(self.roots), dtype=np.float64)

    @cached_property
    def _constants(self) -> Array:
        c, p = self.centres.shape
        one = (
            math.lgamma((FREEDOM + p) / 2) - math.lgamma(FREEDOM / 2) - 0.5 * p * math.log(FREEDOM * math.pi)
        )
        logs = np.full(c, -math.log(c)) if self.shares is None else np.log(self.shares)
        found: Array = one + logs - np.linalg.slogdet(self.roots)[1]
        return found

    def draw(self, n: int, random: np.random.RandomState) -> Array:
        """Draw n vectors, (n, p). The sampler's own kind of generator is asked for, since emcee passes it."""
        c, p = self.centres.shape
        normal = random.standard_normal((n, p)) / np.sqrt(random.chisquare(FREEDOM, n) / FREEDOM)[:, None]
        drawn: Array
        if c == 1:
            drawn = self.centres + normal @ self.roots[0].T
        else:
            which = random.choice(c, size=n, p=self.shares)
            drawn = self.centres[which] + np.einsum("nij,nj->ni", self.roots[which], normal)
        return drawn

    def place(self, points: Array) -> Array:
        """Return the vectors (n, p) that evenly spread points (n, p + 2) in the unit cube become.

        The first coordinate chooses the component, the next ones make normal numbers, the last their tails.
        """
        from scipy.special import ndtri

        c = len(self.centres)
        scores = ndtri(points[:, 1:])
        normal = scores[:, :-1] / np.interp(scores[:, -1], *_radii())[:, None]
        if c == 1:
            return np.asarray(self.centres + normal @ self.roots[0].T)
        shares = np.full(c, 1 / c) if self.shares is None else self.shares
        which = np.minimum(np.searchsorted(np.cumsum(shares), points[:, 0]), c - 1)
        return np.asarray(self.centres[which] + np.einsum("nij,nj->ni", self.roots[which], normal))

    def log_density(self, z: Array) -> Array:
        """Return the log density of a block (n_sets, p) -> (n_sets,)."""
        c, p = self.centres.shape
        # in pieces that stay in the processor's cache
        at_a_time = max(1, PIECE // (c * p))
        pieces = [self._log_density(z[i : i + at_a_time]) for i in range(0, len(z), at_a_time)]
        return np.concatenate(pieces) if len(pieces) != 1 else pieces[0]

    def _log_density(self, z: Array) -> Array:
        c, p = self.centres.shape
        power = (FREEDOM + p) / 2
        middle = self.centres[0]
        # all components by one product: rows of (c p, p) inverses, less what they make of the centres
        scaled = self._inverses.reshape(c * p, p) @ (z - middle).T
        scaled -= (self._inverses @ (self.centres - middle)[:, :, None]).reshape(-1, 1)
        squares = np.square(scaled, out=scaled).reshape(c, p, -1).sum(axis=1)
        logs: Array = self._constants[:, None] - power * np.log1p(squares / FREEDOM)
        highest = logs.max(axis=0)
        found: Array = logs[0] if c == 1 else highest + np.log(np.exp(logs - highest).sum(axis=0))
        return found


@cache
def _radii() -> tuple[Array, Array]:
    """Return a table of the root of chi-square over its degrees of freedom by normal score."""
    from scipy.special import gammaincinv, ndtr

    scores = np.linspace(-8.2, 8.2, 4101)
    return scores, np.sqrt(gammaincinv(FREEDOM / 2, ndtr(scores)) * 2 / FREEDOM)


def from_mode(mode: Mode) -> Proposal:
    """Return the proposal at a posterior's mode with its curvature."""
    return Proposal(mode.z[None], mode.root[None])


def from_draws(draws: Array) -> Proposal:
    """Return the one-component proposal with the mean and covariance of draws (n, p)."""
    return _fit(draws, np.full(len(draws), 1 / len(draws)), 1)


def mix(first: Proposal, second: Proposal, share: float) -> Proposal:
    """Return the components of two proposals side by side, the second's with a share [1] of the whole."""
    parts = [
        weight * (np.full(len(one.centres), 1 / len(one.centres)) if one.shares is None else one.shares)
        for one, weight in ((first, 1 - share), (second, share))
    ]
    return Proposal(
        np.concatenate([first.centres, second.centres]),
        np.concatenate([first.roots, second.roots]),
        np.concatenate(parts),
    )


def ladder(log_density: LogDensity, mode: Mode, along: int = -1, step: float = RUNG) -> Proposal:
    """Return components along one unknown, each with the mode and curvature of the others given it.

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); mode, with its curvature; along, which
    unknown; step [in it] from rung to rung. Where the others bend or widen fast from one rung to the next,
    components stand between the rungs as well, on cubics through them.
    """
    p = len(mode.z)
    along %= p
    others = np.delete(np.arange(p), along)
    centres, covariances, heights, first = _rungs(log_density, mode, along, step)
    slopes = cubics.slopes(centres, step)
    parts = _parts(centres, covariances, slopes, heights, step)
    centres, slopes = cubics.refine(centres, slopes, step, parts)
    heights, _ = cubics.refine(heights, cubics.slopes(heights, step), step, parts)
    shares = np.exp(heights - heights.max())
    kept = np.flatnonzero(shares > SMALLEST_SHARE * shares.sum())
    places = np.arange(len(shares)) / parts
    width = step / parts
    roots = np.zeros((len(kept), p, p))
    for root, n in zip(roots, kept, strict=True):
        low, high = int(places[n]), min(int(places[n]) + 1, len(covariances) - 1)
        covariance = covariances[low] + (places[n] - low) * (covariances[high] - covariances[low])
        root[np.ix_(others, others)] = root_of(covariance)
        root[along, along] = width
        root[others, along] = width * slopes[n]  # the others follow the one
    at = mode.z[along] + step * (first + places[kept])
    centres = np.insert(centres[kept], along, at, axis=1)
    return Proposal(centres, roots, shares[kept] / shares[kept].sum())


def _rungs(log_density: LogDensity, mode: Mode, along: int, step: float) -> tuple[Array, Array, Array, int]:
    """Return modes (n, p - 1), covariances and log evidences of the others, from rung to rung of one unknown.

    The last is the number of the lowest rung, counted from the mode.
    """
    covariance = mode.root @ mode.root.T
    others = np.delete(np.arange(len(mode.z)), along)
    slope = covariance[others, along] / covariance[along, along]
    given = covariance[np.ix_(others, others)] - np.outer(slope, slope) * covariance[along, along]

    def rung(number: int, start: Array, root: Array) -> Mode:
        at = mode.z[along] + number * step
        return laplace.find_mode(
            lambda block: log_density(np.insert(block, along, at, axis=1)), start, root, NEAR
        )

    rungs = {0: rung(0, mode.z[others], root_of(given))}
    highest = rungs[0].log_evidence
    for way in (1, -1):
        last, move, change = rungs[0], way * step * slope, np.zeros(len(others))
        for n in range(1, RUNGS + 1):
            found = rung(way * n, last.z + move + change, last.root)
            if not np.isfinite(found.log_density):
                break
            rungs[way * n] = found
            change = (found.z - last.z - move) if n > 1 else change
            move, last = found.z - last.z, found
            highest = max(highest, last.log_evidence)
            if last.log_evidence < highest - FAINT:
                break
    numbers = sorted(rungs)
    ordered = [rungs[n] for n in numbers]
    return (
        np.array([one.z for one in ordered]),
        np.array([one.root @ one.root.T for one in ordered]),
        np.array([one.log_evidence for one in ordered]),
        numbers[0],
    )


def _parts(centres: Array, covariances: Array, slopes: Array, heights: Array, step: float) -> int:
    """Return how many components a rung needs, each nearly straight, of one width, not too long."""
    n = len(centres)
    if n < 3:
        return 1
    bends = 0.5 * step * np.gradient(slopes, axis=0)
    bent = np.einsum("ni,nij,nj->n", bends, np.linalg.pinv(covariances, hermitian=True), bends)
    spreads = 0.5 * np.log(np.einsum("nii->ni", covariances))
    widened = np.square(np.gradient(spreads, axis=0)).max(axis=1)
    shares = np.exp(heights - heights.max())
    shares /= shares.sum()
    typical_bend = math.sqrt(float(shares @ bent))
    typical_widening = math.sqrt(float(shares @ widened))
    sd = math.sqrt(float(shares @ np.square(np.arange(n) - shares @ np.arange(n))))  # in steps
    wanted = max(math.sqrt(typical_bend / STRAIGHT), typical_widening / EVEN, SLACK / (STRIDE * sd))
    return min(max(math.ceil(wanted), 1), PARTS)


def straighten(log_density: LogDensity, proposal: Proposal, random: np.random.RandomState) -> Proposal:
    """Return a ladder in place of a proposal of one component, where the posterior is bent or skewed.

    Of unknowns that bend together one may turn back where the other goes on: a few draws of both ladders
    tell which is right. A proposal of several components is returned as it is.
    """
    centre, root = proposal.centres[0], proposal.roots[0]
    if len(proposal.centres) > 1 or len(centre) == 1 or _bends(log_density, centre, root).max() < BENT:
        return proposal
    mode = laplace.find_mode(log_density, centre, root)  # what looked bent may lie beside the mode
    bends = _bends(log_density, mode.z, mode.root)
    if bends.max() < BENT:
        return from_mode(mode)
    alike = [i for i in np.argsort(-bends)[:2] if bends[i] > ALIKE * bends.max()]
    steps = STRIDE * np.linalg.norm(mode.root, axis=1)
    ladders = [ladder(log_density, mode, int(along), float(steps[along])) for along in alike]
    return ladders[0] if len(ladders) == 1 else _fittest(log_density, ladders, random)


def _fittest(
    log_density: LogDensity, proposals: Sequence[Proposal], random: np.random.RandomState
) -> Proposal:
    """Return the proposal of the highest efficiency, judged on the draws of all.

    One that misses a part of the posterior may look efficient on its own draws, but not on the others'.
    """
    z = np.concatenate([proposal.draw(FEW_DRAWS, random) for proposal in proposals])
    heights = log_density(z)
    logs = np.array([proposal.log_density(z) for proposal in proposals])
    highest = logs.max(axis=0)
    ratios = heights - highest - np.log(np.exp(logs - highest).mean(axis=0))
    weights = np.exp(ratios - ratios.max())
    # the mean of 1/efficiency under the posterior, up to a constant
    losses = [weights @ np.exp(np.minimum(heights - heights.max() - own, LARGEST)) for own in logs]
    return proposals[int(np.argmin(losses))]


def _bends(log_density: LogDensity, centre: Array, root: Array) -> Array:
    """Return how far from normal a posterior is along each unknown (p,) [nats].

    Each is followed to both sides, the others as they would go with it were the posterior normal. All are 0
    where the posterior ends on the way: then there is nothing to follow.
    """
    covariance = root @ root.T
    away = (covariance / np.sqrt(np.diag(covariance))).T
    places = centre + LOOKS[:, None, None] * away
    heights = log_density(np.concatenate([centre[None], places.reshape(-1, len(centre))]))
    excess = heights[1:].reshape(len(LOOKS), -1) - heights[0] + 0.5 * np.square(LOOKS)[:, None]
    bends: Array = np.abs(excess).sum(axis=0)
    return bends if np.isfinite(bends).all() else np.zeros(len(centre))


def adapt(
    log_density: LogDensity,
    proposal: Proposal,
    random: np.random.RandomState,
    tried: tuple[Array, Array] | None = None,
) -> tuple[Proposal, float]:
    """Return the best of several refitted proposals and its efficiency [1].

    Arguments: log_density, from a block (n_sets, p) to (n_sets,); proposal to start with; random; tried,
    draws (n, p) of that proposal and their log ratios (n,), where there are some: it is then straight as it
    is. The efficiency is the effective share of draws in importance sampling: 1 where the proposal is the
    posterior.
    """
    if tried is None:
        proposal = straighten(log_density, proposal, random)
    best, highest = proposal, -1.0
    for components in COMPONENTS:
        if tried is None:
            z = proposal.draw(DRAWS, random)
            tried = z, log_density(z) - proposal.log_density(z)
        z, ratio = tried
        weights = np.exp(ratio - ratio.max())
        efficiency = float(weights.sum() ** 2 / np.square(weights).sum() / len(z))
        if efficiency > highest:
            best, highest = proposal, efficiency
        if efficiency >= GOOD:
            break
        weights = np.minimum(weights, np.partition(weights, -CUT)[-CUT])
        proposal, tried = _fit(z, weights / weights.sum(), components), None
    return best, highest


def _fit(draws: Array, weights: Array, components: int) -> Proposal:
    """Fit components to weighted draws (n, p), cut into equal shares along their longest axis."""
    centre, root = _moments(draws, weights)
    if components == 1:
        return Proposal(centre[None], root[None])
    along = np.linalg.svd(root / np.linalg.norm(root, axis=1)[:, None])[0][:, 0]
    order = np.argsort(((draws - centre) / np.linalg.norm(root, axis=1)) @ along)
    share = np.cumsum(weights[order]) * components
    parts = []
    for i in range(components):
        part = order[(share >= i - OVERLAP) & (share <= i + 1 + OVERLAP)]
        if len(part) > 2 * draws.shape[1]:
            parts.append(_moments(draws[part], weights[part] / weights[part].sum()))
    parts.append((centre, TAILS * root))
    return Proposal(np.array([c for c, _ in parts]), np.array([r for _, r in parts]))


def _moments(draws: Array, weights: Array) -> tuple[Array, Array]:
    """Return mean (p,) and a root (p, p) of the widened covariance of weighted draws."""
    centre = weights @ draws
    away = draws - centre
    return centre, root_of(WIDER * (away.T @ (away * weights[:, None])))


def root_of(covariance: Array) -> Array:
    """Return a root of a covariance (p, p), be it flat in some direction or of very different scales."""
    scale = np.sqrt(np.maximum(np.diag(covariance), np.finfo(np.float64).tiny))
    spread, axes = np.linalg.eigh(covariance / np.outer(scale, scale))
    found: Array = scale[:, None] * (axes * np.sqrt(np.maximum(spread, SMALLEST_SPREAD)))
    return found
