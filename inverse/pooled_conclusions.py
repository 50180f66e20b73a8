"""What a pooled estimate comes to: shared numbers, errors that were learnt, h of every run, and findings.

All numbers are averages over the candidates by their probability, as those of a fit are.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from finback import arrow, fast
from finback.estimate import DeterminedBy, Summary
from finback.fast import FastPosterior
from finback.findings import Finding
from finback.identifiability import DETERMINED, NARROWED, Information
from finback.pooled_fit import Fitted, parts
from finback.pooled_model import OWN_SHARE, Group, Model
from finback.pooled_runs import Pool
from finback.summaries import BEYOND, ONE_SIDED, POSITIVE, describe, to_reported
from finback.wording import listed

Array = NDArray[np.float64]

STRANGE = 1e-3  # probability that one run of a campaign lies so far off by chance
SHARE_THAT_MATTERS = 0.05  # probability from which a candidate's k-hat counts
FAR = 3.0  # stated standard uncertainties that an error may have before it is told
OFF = 1.3  # chi-square over its degrees of freedom that a model may have
NORMAL_95 = 1.959964  # standard deviations to either side that hold 95 %


@dataclass(frozen=True, eq=False)
class Member:
    """A candidate that has a part in the averages: its fit, and draws of what its runs share, if anything."""

    fitted: Fitted
    posterior: FastPosterior | None

    @property
    def log_evidence(self) -> float:
        """Log evidence [nats], by the draws where there are some."""
        return self.fitted.log_evidence if self.posterior is None else self.posterior.evidence.log


@dataclass(frozen=True)
class Mixed:
    """Draws z (n, p) of several candidates with weights (n,) that add up to one."""

    z: Array
    weights: Array

    def quantiles(self, values: Array, probabilities: Sequence[float]) -> list[float]:
        """Return quantiles of a quantity (n,)."""
        order = np.argsort(values)
        below = np.cumsum(self.weights[order]) - 0.5 * self.weights[order]
        return [float(q) for q in np.interp(probabilities, below, values[order])]


@dataclass(frozen=True, slots=True)
class Learnt:
    """An error that all runs share, as they tell it.

    `name` of the sensor or length; `unit`; `mean`, `sd`; `stated`, its standard uncertainty beforehand.
    """

    name: str
    unit: str
    mean: float
    sd: float
    stated: float


@dataclass(frozen=True)
class PooledRuns:
    """What pooling says of each row, (rows,) each.

    `names`, `uses`, `reasons` why one is left out; h with sd and interval [W/(m² K)], nan where it is not
    determined; `chi_square` and its degrees of `freedom`, nan where a row is left out.
    """

    names: tuple[str, ...]
    uses: tuple[str, ...]
    reasons: tuple[str | None, ...]
    h_median: Array
    h_sd: Array
    h_low95: Array
    h_high95: Array
    chi_square: Array
    freedom: Array


@dataclass(frozen=True)
class Pooled:
    """A pooled estimate.

    `shared` and `noise`; `correlation` (n, n) of the coordinates of those that are determined, in
    their order; `offsets` of
    sensors, `holes`, `lengths`; `h_shared_sd`, the relative standard uncertainty of h that all runs have in
    common; `candidates` with their probability and log evidence, best first, over which all numbers are
    averages; `draws`, `khat`, `efficiency`; `runs`; `findings`; `seed`.
    """

    pool: Pool
    shared: Mapping[str, Summary]
    noise: Summary | None
    correlation: Array
    offsets: tuple[Learnt, ...]
    holes: tuple[Learnt, ...]
    lengths: tuple[Learnt, ...]
    h_shared_sd: float | None
    candidates: tuple[tuple[str, float, float], ...]
    draws: int
    khat: float
    efficiency: float
    runs: PooledRuns
    findings: tuple[Finding, ...]
    seed: int

    @property
    def status(self) -> str:
        """Whether there is more to know than notes: "caution", else "ok"."""
        return "ok" if all(finding.severity == "note" for finding in self.findings) else "caution"


@dataclass(frozen=True)
class _Border:
    """What the shared unknowns and errors are together: `mean` of s less its mode and `covariance` of both.

    (q,) and (q + m, q + m). `follow` (m, q): how the errors go with s.
    """

    away: Array
    covariance: Array


def _border(member: Member) -> _Border:
    """Return the joint normal of shared unknowns and errors, s with the moments of its draws."""
    fitted, posterior = member.fitted, member.posterior
    q = fitted.model.n_physical
    border = fitted.solved.border[0]
    m = len(border) - q
    given = np.linalg.inv(border[q:, q:])
    follow = -given @ border[q:, :q]
    away, of_s = np.zeros(q), np.zeros((q, q))
    if posterior is not None and q:
        drawn = posterior.z[:, :q] - fitted.z[:q]
        away = posterior.weights @ drawn
        of_s = (drawn - away).T @ ((drawn - away) * posterior.weights[:, None])
    whole = np.zeros((q + m, q + m))
    whole[:q, :q] = of_s
    whole[q:, :q] = follow @ of_s
    whole[:q, q:] = whole[q:, :q].T
    whole[q:, q:] = given + follow @ of_s @ follow.T
    return _Border(np.concatenate([away, follow @ away]), whole)


def _information(model: Model, border: Array) -> tuple[Information, NDArray[np.intp]]:
    """Return the information on the shared unknowns and the levels nothing states, and where those stand.

    Levels count with them: what is supposed of h beforehand is no reading.
    """
    q = model.n_physical
    wide = {p.name for group in model.groups if group.problem for p in group.own if not p.stated}
    levels = [q + i for i, e in enumerate(model.errors) if e.kind == "level" and e.name in wide]
    kept = np.array([*range(q), *levels], dtype=np.intp)
    others = np.setdiff1d(np.arange(len(border)), kept)
    across = border[np.ix_(kept, others)]
    seen = border[np.ix_(kept, kept)] - across @ np.linalg.solve(border[np.ix_(others, others)], across.T)
    physical = model.shared[:q]
    prior = np.array([*(p.prior.sd**-2 for p in physical), *(1.0 for _ in levels)])
    stated = np.array([*(p.prior.sd**-2 if p.stated else 0.0 for p in physical), *(0.0 for _ in levels)])
    default = np.array([*(p.default_prior.sd**-2 for p in physical), *(1.0 for _ in levels)])
    return Information(seen - np.diag(prior), stated, default), kept


def conclude(
    pool: Pool, members: Sequence[Member], others: Sequence[Fitted], strange: Sequence[str], seed: int
) -> Pooled:
    """Average over candidates and say what comes of it.

    Arguments: pool; members, the candidates that have a part in the averages, best first; others; strange,
    the names of runs that were left out as they disagree with all others; seed of the draws.
    """
    logs = np.array([*(m.log_evidence for m in members), *(each.log_evidence for each in others)])
    chances = np.exp(logs - logs.max()) / np.exp(logs - logs.max()).sum()
    shares = chances[: len(members)] / chances[: len(members)].sum()
    candidates = [*(m.fitted.model.candidate for m in members), *(each.model.candidate for each in others)]
    named = tuple(
        (candidate.name, float(p), float(log))
        for candidate, p, log in zip(candidates, chances, logs, strict=True)
    )
    borders = [_border(member) for member in members]
    shared, correlation, findings = _shared(pool, members, shares)
    runs, common = _runs(pool, members, shares, borders)
    errors = [_learnt(pool, member.fitted, border) for member, border in zip(members, borders, strict=True)]
    offsets, holes, lengths = (_averaged([each[i] for each in errors], shares) for i in range(3))
    drawn = [m.posterior for m in members if m.posterior is not None]
    mattering = [
        m.posterior for m, p in zip(members, shares, strict=True) if m.posterior and p >= SHARE_THAT_MATTERS
    ]
    khat = max((each.khat for each in mattering), default=-math.inf)
    return Pooled(
        pool=pool,
        shared=shared,
        noise=_noise(members, shares),
        correlation=correlation,
        offsets=offsets,
        holes=holes,
        lengths=lengths,
        h_shared_sd=common,
        candidates=named,
        draws=sum(len(each.z) for each in drawn),
        khat=khat,
        efficiency=min((each.efficiency for each in mattering), default=1.0),
        runs=runs,
        findings=(
            *findings,
            *_of_assumptions(pool),
            *_of_runs(members[0].fitted, strange),
            *_of_errors(offsets, holes),
            *_of_sampling(khat),
        ),
        seed=seed,
    )


def _averaged(found: Sequence[tuple[Learnt, ...]], shares: Array) -> tuple[Learnt, ...]:
    """Return errors averaged over candidates, which all have the same ones."""
    averaged = []
    for alike in zip(*found, strict=True):
        means, sds = (np.array([getattr(each, name) for each in alike]) for name in ("mean", "sd"))
        mean = float(shares @ means)
        sd = math.sqrt(float(shares @ (sds**2 + (means - mean) ** 2)))
        averaged.append(replace(alike[0], mean=mean, sd=sd))
    return tuple(averaged)


def _mixed(members: Sequence[Member], shares: Array, having: Sequence[str]) -> tuple[Mixed, list[Member]]:
    """Return the draws of the candidates that have all of these unknowns, weighted by their probability."""
    chosen = [
        (member, member.posterior, share)
        for member, share in zip(members, shares, strict=True)
        if member.posterior is not None and set(having) <= {p.name for p in member.fitted.model.shared}
    ]
    columns = []
    for member, posterior, _ in chosen:
        names = [p.name for p in member.fitted.model.shared]
        columns.append(posterior.z[:, [names.index(name) for name in having]])
    weights = np.concatenate([share * posterior.weights for _, posterior, share in chosen] or [np.zeros(0)])
    z = np.concatenate(columns or [np.zeros((0, len(having)))])
    return Mixed(z, weights / max(weights.sum(), 1e-300)), [member for member, *_ in chosen]


def _noise(members: Sequence[Member], shares: Array) -> Summary | None:
    if not members[0].fitted.model.noise_estimated:
        return None
    mixed, _ = _mixed(members, shares, ("noise",))
    return _summary("noise", np.exp(mixed.z[:, 0]), mixed, "readings")


def _summary(name: str, values: Array, mixed: Mixed, source: DeterminedBy) -> Summary:
    """Return the summary of a quantity by its weighted draws (n,), SI units."""
    label, unit = describe(name)
    shown = to_reported(name, values)
    low, median, high = mixed.quantiles(shown, (0.025, 0.5, 0.975))
    mean = float(mixed.weights @ shown)
    sd = math.sqrt(float(mixed.weights @ (shown - mean) ** 2))
    return Summary(name, label, unit, median, mean, sd, low, high, None, None, source)


def _shared(
    pool: Pool, members: Sequence[Member], shares: Array
) -> tuple[dict[str, Summary], Array, list[Finding]]:
    """Return what is shared, the correlation of those that are determined, and why others are not."""
    factors: dict[str, tuple[str, ...]] = {name: (name,) for name in pool.share}
    if {"k", "joint"} <= set(pool.share):
        factors["joint_times_k"] = ("k", "joint")
    found: dict[str, Summary] = {}
    findings = []
    for name, parts_of_it in factors.items():
        mixed, having = _mixed(members, shares, parts_of_it)
        have = sum(float(p) for m, p in zip(members, shares, strict=True) if m in having)
        found[name], why = _one_shared(name, parts_of_it, mixed, having, have)
        if why is not None:
            findings.append(_not_determined(name, why))
    determined = [name for name in pool.share if found[name].median is not None]
    mixed, _ = _mixed(members, shares, determined)
    away = mixed.z - mixed.weights @ mixed.z
    covariance = away.T @ (away * mixed.weights[:, None])
    sds = np.sqrt(np.diag(covariance))
    return found, covariance / np.outer(sds, sds), findings


def _one_shared(
    name: str, factors: Sequence[str], mixed: Mixed, having: Sequence[Member], share: float
) -> tuple[Summary, str | None]:
    """Return the summary of a product of shared unknowns, and why it is not determined if it is not.

    Argument: share, the probability of the candidates that have it.
    """
    label, unit = describe(name)
    if not having:
        nothing = Summary(name, label, unit, *(None,) * 7, "prior")
        return nothing, "no candidate that the runs support has one"
    fitted = having[0].fitted
    names = [parameter.name for parameter in fitted.model.shared]
    columns = [names.index(factor) for factor in factors]
    values = np.prod([fitted.model.shared[c].values(mixed.z[:, i]) for i, c in enumerate(columns)], axis=0)
    information, kept = _information(fitted.model, fitted.solved.border[0])
    gradient = np.zeros(len(kept))
    gradient[columns] = 1.0
    determined = information.determines(gradient)
    if name in POSITIVE:  # whose coordinate is a logarithm
        determined = determined and information.clears_zero(gradient, 1.0)
    if determined and share >= 0.5:
        return _summary(name, values, mixed, information.source(gradient)), None
    limit = None
    if name in POSITIVE:
        limit = _upper_limit(having[0], mixed, values, gradient, columns)
    low = None if limit is None else 0.0
    limited = Summary(name, label, unit, None, None, None, low, limit, None, None, "prior")
    if share < 0.5:
        return limited, "the runs rather speak for there being none"
    if limit is not None:
        return limited, "the readings of all runs together only limit it from above"
    return limited, "the readings of all runs together leave it open"


def _not_determined(name: str, why: str) -> Finding:
    label = describe(name)[0]
    message = f"The {label} that all runs share is not determined: {why}."
    return Finding("not-determined", "caution", message, evidence={"quantity": name})


def _upper_limit(
    member: Member, mixed: Mixed, values: Array, gradient: Array, columns: Sequence[int]
) -> float | None:
    """Return the one-sided limit of a positive quantity, if the readings would have seen a larger one."""
    fitted = member.fitted
    assert member.posterior is not None, "a candidate with shared unknowns has draws"
    limit = mixed.quantiles(values, (ONE_SIDED,))[0]
    logs = member.posterior.z[:, columns].sum(axis=1)
    at = member.posterior.z[int(np.argmin(np.abs(logs - math.log(limit))))].copy()
    at[columns[-1]] += math.log(BEYOND)
    s, sigma = parts(fitted.model, at[None])
    try:
        state, _ = arrow.settle(fitted.model, fitted.state, s, sigma, 1e-3)
        border = arrow.solve(fitted.model, state, s, sigma, shared=True).border[0]
    except np.linalg.LinAlgError:
        return None
    return limit if _information(fitted.model, border)[0].determines(gradient) else None


def _runs(
    pool: Pool, members: Sequence[Member], shares: Array, borders: Sequence[_Border]
) -> tuple[PooledRuns, float | None]:
    """Return what each row comes to, and the relative sd of h that all runs have in common."""
    count = len(pool.rows)
    square, freedom = np.full(count, np.nan), np.full(count, np.nan)
    known = np.zeros(count, dtype=bool)
    means, variances = (np.full((len(members), count), np.nan) for _ in range(2))
    common = np.zeros(len(members))
    for number, (member, border) in enumerate(zip(members, borders, strict=True)):
        responses = np.zeros((count, len(border.away)))
        for place, group in enumerate(member.fitted.model.groups):
            if number == 0:
                square[group.runs] = member.fitted.solved.squares[place]
                freedom[group.runs] = member.fitted.solved.freedom[place]
            if group.problem is None:
                continue
            told = _coefficients(member.fitted, place, border)
            means[number, group.runs], variances[number, group.runs], sure, responses[group.runs] = told
            if number == 0:
                known[group.runs] = sure
        of_all = responses[known].mean(axis=0) if known.any() else responses[0]
        common[number] = of_all @ border.covariance @ of_all
    mean = np.where(known, shares @ means, np.nan)
    sd = np.sqrt(shares @ (variances + (means - mean) ** 2))
    found = PooledRuns(
        names=tuple(row.name for row in pool.rows),
        uses=tuple(row.use for row in pool.rows),
        reasons=tuple(row.reason for row in pool.rows),
        h_median=np.exp(mean),
        h_sd=np.exp(mean + 0.5 * sd**2) * np.sqrt(np.expm1(sd**2)),
        h_low95=np.exp(mean - NORMAL_95 * sd),
        h_high95=np.exp(mean + NORMAL_95 * sd),
        chi_square=square,
        freedom=freedom,
    )
    if not known.any():
        return found, None
    moved = (means[:, known] - mean[known]).mean(axis=1)
    return found, math.sqrt(float(shares @ (common + moved**2)))


def _coefficients(
    fitted: Fitted, number: int, border: _Border
) -> tuple[Array, Array, NDArray[np.bool_], Array]:
    """Return mean and variance of ln h of a group's runs (R,), whether it is determined, and its response.

    The response (R, q + m) is what ln h does with what runs share. h is determined where wide priors, its own
    and those of the other unknowns, supply at most a fifth of what is known of it.
    """
    model, group, solved = fitted.model, fitted.model.groups[number], fitted.solved
    at = [parameter.name for parameter in group.own].index("h")
    responses, spreads = solved.responses[number][0], solved.spreads[number]
    response = responses[:, at]
    mean = fitted.state.w[number][0, :, at] + response @ border.away
    with_border = response @ border.covariance
    with_own = spreads[:, at] + np.einsum("rg,rpg->rp", with_border, responses)
    variance = with_own[:, at]
    wide = np.array([0.0 if p.stated else p.prior.sd**-2 for p in group.own])
    from_nowhere = np.square(with_own) @ wide
    q = model.n_physical
    of_shared = [0.0 if p.stated else p.prior.sd**-2 for p in model.shared[:q]]
    levels = {p.name for p in group.own if not p.stated}
    of_errors = [float(e.kind == "level" and e.name in levels) for e in model.errors]
    from_nowhere += np.square(with_border) @ np.array([*of_shared, *of_errors])
    known = (from_nowhere <= DETERMINED * variance) | (variance <= (NARROWED * group.own_sds[at]) ** 2)
    return mean, variance, known & (9.0 * variance <= 1.0), response


def _learnt(
    pool: Pool, fitted: Fitted, border: _Border
) -> tuple[tuple[Learnt, ...], tuple[Learnt, ...], tuple[Learnt, ...]]:
    """Return the offsets of sensors, the displacements of holes and the errors of lengths."""
    model = fitted.model
    q = model.n_physical
    u = fitted.state.u[0] + border.away[q:]
    covariance = border.covariance[q:, q:]

    def told(name: str, unit: str, weights: Array) -> Learnt:
        sd = math.sqrt(max(float(weights @ covariance @ weights), 0.0))
        return Learnt(name, unit, float(weights @ u), sd, float(np.sqrt(weights @ weights)))

    offsets, holes, lengths = [], [], []
    calibrations = [i for i, error in enumerate(model.errors) if error.kind in ("common", "own")]
    for name, sensor in pool.rig.sensors.items():
        effects = [_effect(group, name) for group in model.groups]
        whole = np.concatenate([each for each in effects if each is not None] or [np.zeros((0, len(u)))])
        if not len(whole):
            continue
        weights = np.zeros(len(u))
        if sensor.calibration_relative is not None:
            values = np.concatenate(
                [g.values[:, g.sensors.index(sensor)] for g in model.groups if sensor in g.sensors]
            )
            whole = whole / np.abs(np.where(values == 0, np.inf, values))[:, None]
        weights[calibrations] = whole[:, calibrations].mean(axis=0)
        if weights.any():
            unit = (
                "1" if sensor.calibration_relative is not None else "K" if sensor.reads_temperature else "W"
            )
            offsets.append(told(name, unit, weights))
    for column, error in enumerate(model.errors):
        weights = np.zeros(len(u))
        if error.kind == "position":
            weights[column] = 1e3 * pool.rig.sensors[error.name].position_sd
            holes.append(told(error.name, "mm", weights))
        elif error.kind == "length":
            weights[column] = 1e3 * pool.rig.geometry[error.name].sd
            lengths.append(told(error.name, "mm", weights))
    return tuple(offsets), tuple(holes), tuple(lengths)


def _effect(group: Group, name: str) -> Array | None:
    """Return what shared errors do to the readings of a sensor (R, m), None where the group has none."""
    names = [sensor.name for sensor in group.sensors]
    return group.errors[:, names.index(name)] if name in names else None


def _of_assumptions(pool: Pool) -> list[Finding]:
    found = []
    if "heavy-tailed" in pool.rig.noise:
        message = "The pooled estimate takes normal noise; runs that lie far off are left out instead."
        found.append(Finding("assumed", "note", message, evidence={"key": "noise"}))
    if any(s.calibration_at(300.0) > 0 for s in pool.rig.fin_sensors()) and len(pool.rig.fin_sensors()) > 1:
        message = (
            f"Of the variance of a stated calibration, a share of {OWN_SHARE:g} is taken to be each sensor's "
            "own and the rest common to all sensors of its place; both are taken to stay as they are from "
            "run to run, and so are holes and lengths."
        )
        found.append(Finding("assumed", "note", message, evidence={"key": "calibration", "value": OWN_SHARE}))
    return found


def _of_runs(fitted: Fitted, strange: Sequence[str]) -> list[Finding]:
    found = []
    if strange:
        count = len(strange)
        message = (
            f"{count} run{'s' * (count != 1)} disagree{'s' * (count == 1)} with all others, whatever the h, "
            f"and {'are' if count != 1 else 'is'} left out: {listed(strange, 5)}."
        )
        found.append(Finding("misfit", "caution", message, evidence={"runs": count}))
    square = sum(float(each.sum()) for each in fitted.solved.squares)
    freedom = sum(float(each.sum()) for each in fitted.solved.freedom)
    probability = float(chance(np.array([square]), np.array([freedom]))[0])
    if not fitted.model.noise_estimated and square > OFF * freedom and probability < STRANGE:
        message = (
            f"The runs scatter more than is stated, with chi-square {square:.4g} on {freedom:.4g} degrees "
            "of freedom: what is shared may change from run to run, or the noise is stated too small; the "
            "pooled intervals are then too narrow."
        )
        evidence = {"chi_square": square, "degrees_of_freedom": freedom}
        found.append(Finding("misfit", "caution", message, evidence=evidence))
    return found


def chance(square: Array, freedom: Array) -> Array:
    """Return the probability of a chi-square (n,) at least as large, 1 where next to nothing is free."""
    from scipy.special import gammaincc

    free = np.maximum(freedom, 1e-9)
    return np.where(freedom > 0.2, gammaincc(free / 2, square / 2), 1.0)


def _of_errors(offsets: Sequence[Learnt], holes: Sequence[Learnt]) -> list[Finding]:
    found = []
    for each in offsets:
        if abs(each.mean) > FAR * each.stated:
            amount = f"{100 * each.mean:+.2g} %" if each.unit == "1" else f"{each.mean:+.2g} {each.unit}"
            message = f"{each.name} is off by {amount} in every run, beyond {FAR:g} times what is stated."
            found.append(Finding("sensor-outlier", "caution", message, each.name, {"offset": each.mean}))
    for each in holes:
        if abs(each.mean) > FAR * each.stated:
            message = (
                f"The hole of {each.name} is {each.mean:+.2g} mm from where it is stated to be, beyond "
                f"{FAR:g} times the stated uncertainty of its position."
            )
            found.append(Finding("position-shift", "caution", message, each.name, {"shift": each.mean}))
    return found


def _of_sampling(khat: float) -> list[Finding]:
    if khat <= fast.TRUSTED:
        return []
    message = (
        f"The draws of what runs share cannot be trusted fully (k-hat {khat:.2f} above "
        f"{fast.TRUSTED:g}); their intervals are rough."
    )
    return [Finding("not-converged", "caution", message, evidence={"khat": khat})]
