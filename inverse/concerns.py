"""Concerns: what the engineer must know beside the numbers: findings, and a sentence on the candidates."""

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from finback import posing, tails
from finback.estimate import CandidateScore, FitQuality, SamplerRecord, Summary
from finback.findings import Finding, Severity
from finback.models.constants import ZERO_CELSIUS
from finback.models.validity import TRANSVERSE_BIOT_LIMIT
from finback.parameters import UNMEASURED_AIR
from finback.problem import HEAVY_TAILS, SMOOTH_MISFIT
from finback.quantity import format_number, pretty_unit
from finback.rig import Rig
from finback.routes import Outcome
from finback.summaries import OF_THE_JOINT
from finback.thermocouples import ThermocoupleClass
from finback.wording import listed, quoted

Array = NDArray[np.float64]

MISFIT_P = 0.01
LIKELY = 0.5  # probability of a smooth misfit above which it is said
CLEAR = 0.9  # probability from which the readings are said to support a candidate
MENTIONED = 0.05  # and below which one is not named among those that cannot be told apart
HEATER_MARGIN = 2.0  # standard uncertainties of its power
FAR_OFF = 4.0  # times its scale, from which a reading with heavy tails is named
FAR_AIR = 1.5  # standard deviations from where unread air is assumed, at which that is said

SAID_WITH = {
    "joint_times_k": "joint",
    "base_heat_flux": "heat",
    "plate_heat": "heat",
    "heat_convected": "heat",
    "heat_radiated": "heat",
}  # null for the reason given for the other
OF_A_LAW = ("exponent", "rise", "emissivity")
APART = "state the conductivity or measure the heat into the fin"


def collect(
    rig: Rig,
    found: Mapping[str, Summary],
    quality: FitQuality,
    sampler: SamplerRecord,
    best: Outcome,
    smooth: Finding | None = None,
    heat: float | None = None,
    wrong: Sequence[Finding] = (),
) -> tuple[Finding, ...]:
    """Return the findings of a fit, gravest first.

    `smooth` is what was found of a smooth misfit, `heat` [W] what would flow without one, `wrong` what was
    found of readings that are wrong.
    """
    explained = smooth is not None and not best.problem.candidate.misfit
    everything = [
        *_undetermined(rig, found, best),
        *([] if smooth is None else [smooth]),
        *wrong,
        *([] if explained else _misfit(quality)),
        *thick_fin(found["transverse_biot"].median),
        *_thermocouples(best),
        *_heater(found, best, heat),
        *_unread_air(rig, found, best),
        *_convergence(sampler),
        *_disagreement(best),
        *rig.assumed,
    ]
    gravity = {"fault": 0, "caution": 1, "note": 2}
    return tuple(sorted(everything, key=lambda f: gravity[f.severity]))


def _undetermined(rig: Rig, found: Mapping[str, Summary], best: Outcome) -> list[Finding]:
    """Return a finding for each quantity that is null, in the engineer's terms."""
    read = {s.place for s in best.problem.measured.sensors}
    parted = any(map(rig.tells_heat, read)) or rig.conductivity is not None
    findings = []
    for name, summary in found.items():
        said = name in SAID_WITH and found[SAID_WITH[name]].median is None
        if summary.median is None and not said:
            severity, reason = _reason(name, found, parted, best.problem.candidate.joint_possible)
            message = f"{summary.label[0].upper()}{summary.label[1:]} {reason}."
            findings.append(Finding("not-determined", severity, message, evidence={"quantity": name}))
    return findings


def _reason(
    name: str, found: Mapping[str, Summary], parted: bool, joint_possible: bool
) -> tuple[Severity, str]:
    """Return how grave it is that a quantity is null, and the rest of the sentence that says why."""
    ratio, product, limit = found["h_over_k"].median, found["joint_times_k"].median, found[name].high95
    if name in OF_THE_JOINT and not joint_possible:
        return "note", "is not determined: that needs a temperature on the plate side of the joint"
    if limit is not None:
        unit = pretty_unit(found[name].unit)
        return "note", f"is too small for these readings: at most {format_number(limit)} {unit} (95 %)"
    if not parted and name == "joint" and product is not None:
        return "caution", f"is not determined: the readings give only R''·k = {product:.4g} m; {APART}"
    if not parted and name in ("h", "k") and ratio is not None:
        return "caution", f"is not determined: the temperatures give only h/k = {ratio:.4g} 1/m; {APART}"
    if not parted and name in ("heat", "base_heat_flux"):
        return "caution", f"is not determined without a conductivity; {APART}"
    return "note" if name in OF_A_LAW else "caution", "is not determined by these readings"


def smooth_misfit(outcomes: Sequence[Outcome], probabilities: Sequence[float]) -> Finding | None:
    """Return a finding where the candidates with a smooth misfit are more probable than those without."""
    shares = [(p, o) for p, o in zip(probabilities, outcomes, strict=True) if o.problem.candidate.misfit]
    probability = float(sum(p for p, _ in shares))
    if probability <= LIKELY:
        return None
    outcome = shares[0][1]
    problem = outcome.problem
    share = float(np.exp(np.median(outcome.draws[..., problem.n_physical])))
    most = share * float(np.sqrt(np.diag(posing.smooth_covariance(problem, outcome.point.z)).max()))
    message = (
        f"The readings depart from every model in a smooth pattern (probability {probability:.2g}) of some "
        f"{100 * share:.2g} % of the excess temperature, up to {most:.2g} K: the intervals allow for an h "
        "that changes along the fin, leads that carry heat off, or air that is not the same everywhere, but "
        "not for a sensor that is wrong."
    )
    return Finding("misfit", "caution", message, evidence={"probability": probability, "share": share})


def heavy_tails(outcomes: Sequence[Outcome], probabilities: Sequence[float]) -> tuple[Finding, ...]:
    """Return a finding where heavy-tailed noise is more probable than a normal one, or is the only one.

    It names the readings that are far off; the only one is told of where there are some.
    """
    shares = [(p, o) for p, o in zip(probabilities, outcomes, strict=True) if o.problem.candidate.heavy_tails]
    probability = float(sum(p for p, _ in shares))
    if probability <= LIKELY:
        return ()
    best = shares[0][1]
    whitened, _ = best.problem.whitened(best.mode.z[None])
    away = tails.unbend(whitened[0, : best.problem.noise.heavy])
    names = [s.name for s, e in zip(best.problem.measured.sensors, away, strict=False) if abs(e) > FAR_OFF]
    told = []
    if "normal" in best.problem.rig.noise:
        told.append(f"readings along the fin scatter wider than normal noise (probability {probability:.2g})")
    if names:
        verbs = ("lies", "counts") if len(names) == 1 else ("lie", "count")
        told.append("{} {} far off and hardly {}".format(listed(names), *verbs))
    if not told:
        return ()
    remedy = "look for a loose junction, a wrong hole or a wrong channel"
    message = f"Noise with heavy tails: {'; '.join([*told, remedy])}."
    sensor = names[0] if len(names) == 1 else None
    return (Finding("misfit", "caution", message, sensor, {"probability": probability}),)


def _misfit(quality: FitQuality) -> list[Finding]:
    if quality.p_value is None or quality.p_value >= MISFIT_P:
        return []
    message = (
        f"No candidate explains the readings within their stated uncertainties (chi-square "
        f"{quality.chi_square:.3g} for {quality.degrees_of_freedom} degrees of freedom, "
        f"p = {quality.p_value:.2g}): a reading, an uncertainty or the model is wrong, and the intervals are "
        "too narrow."
    )
    return [Finding("misfit", "caution", message, evidence={"p_value": quality.p_value})]


def thick_fin(biot: float | None) -> list[Finding]:
    """Return a finding where a transverse Biot number is too large for one dimension."""
    if biot is None or biot <= TRANSVERSE_BIOT_LIMIT:
        return []
    message = (
        f"The transverse Biot number is {biot:.2g}, above {TRANSVERSE_BIOT_LIMIT:g}: the temperature is not "
        "uniform across the fin, and the one-dimensional model does not hold."
    )
    return [Finding("thick-fin", "caution", message, evidence={"transverse_biot": biot})]


def _thermocouples(best: Outcome) -> list[Finding]:
    """Return a finding for each thermocouple class that is stated outside of its range."""
    measured = best.problem.measured
    outside: dict[ThermocoupleClass, list[str]] = {}
    for sensor, value in zip(measured.sensors, measured.values, strict=True):
        kind = sensor.calibration_class
        if kind is not None and not kind.covers(value):
            outside.setdefault(kind, []).append(sensor.name)
    findings = []
    for kind, names in outside.items():
        message = (
            f"{listed(names)} read outside {kind.range}, where {kind.standard} gives no tolerance for "
            f"{quoted(kind.name)}: it is taken to go on as within."
        )
        sensor_name = names[0] if len(names) == 1 else None
        findings.append(Finding("out-of-range", "note", message, sensor_name, {"class": kind.name}))
    return findings


def heat_asked_for(
    found: Mapping[str, Summary], outcomes: Sequence[Outcome], evaluated: Sequence[Mapping[str, Array]]
) -> float | None:
    """Return the heat [W] that the temperatures ask for, also where a misfit would explain it away."""
    name = "plate_heat" if "plate_heat" in found else "heat"
    if not outcomes[0].problem.candidate.misfit:
        return found[name].median
    pairs = zip(outcomes, evaluated, strict=True)
    return float(np.median(next(q[name] for o, q in pairs if not o.problem.candidate.misfit)))


def _heater(found: Mapping[str, Summary], best: Outcome, heat: float | None) -> list[Finding]:
    """Return a finding where the heat that the temperatures ask for is more than a heater supplies."""
    measured = best.problem.measured
    if heat is None:
        return []
    taker = "the fins and from the bare plate" if "plate_heat" in found else "the fin"
    findings = []
    for sensor, power, sd in zip(measured.bounds, measured.bound_values, measured.bound_sds, strict=True):
        if heat > power + HEATER_MARGIN * sd:
            message = (
                f"{heat:.3g} W would have to flow into {taker}, but {sensor.name} supplies {power:.3g} W: "
                "the heat balance is impossible."
            )
            findings.append(Finding("heat-balance", "fault", message, sensor=sensor.name))
    return findings


def scored(scores: Sequence[CandidateScore]) -> tuple[Finding, ...]:
    """Return a finding where a candidate's AICc is not given."""
    missing = [score.name for score in scores if score.aicc is None]
    if not missing:
        return ()
    message = f"AICc needs two readings more than unknowns, and is not given for {'; '.join(missing)}."
    return (Finding("not-determined", "note", message, evidence={"score": "aicc"}),)


def _unread_air(rig: Rig, found: Mapping[str, Summary], best: Outcome) -> list[Finding]:
    """Return what must be said of an air temperature that nobody read nor stated."""
    if rig.surroundings.air is not None or "air" in best.problem.fixed:
        return []
    if any(sensor.place == "air" for sensor in best.problem.measured.sensors):
        return []
    taken = f"{UNMEASURED_AIR.mean - ZERO_CELSIUS:.0f} °C ± {UNMEASURED_AIR.sd:.0f} K"
    remedy = 'read it, or state it with temperature = "21 degC +/- 1 K" in [air]'
    message = f"Nothing reads the air: its temperature is left free about {taken}; {remedy}."
    assumed = Finding("assumed", "note", message, evidence={"key": "temperature"})
    air = found["air"].median
    if air is None or abs(air + ZERO_CELSIUS - UNMEASURED_AIR.mean) <= FAR_AIR * UNMEASURED_AIR.sd:
        return [assumed]
    message = (
        f"The profile speaks of air at {air:.0f} °C, far from the {taken} that were assumed since nothing "
        f"reads it, so every interval is drawn towards those: {remedy}."
    )
    return [assumed, Finding("air-reference", "caution", message, evidence={"air": air})]


def _convergence(sampler: SamplerRecord) -> list[Finding]:
    if sampler.converged:
        return []
    rhat = "unknown" if sampler.rhat_max is None else f"{sampler.rhat_max:.3g}"
    message = (
        f"The sampler has not converged (largest R-hat {rhat}, smallest effective sample "
        f"{sampler.ess_min:.0f}): treat every interval as provisional."
    )
    return [Finding("not-converged", "caution", message)]


def _disagreement(best: Outcome) -> list[Finding]:
    """Return a finding where the Markov chain and the weighted draws see a quantity differently."""
    if not best.disagreeing:
        return []
    message = (
        f"The Markov chain and weighted draws of the posterior disagree about {', '.join(best.disagreeing)}: "
        "treat their intervals as provisional."
    )
    return [Finding("not-converged", "caution", message, evidence={"quantities": len(best.disagreeing)})]


def compare_in_words(scores: Sequence[CandidateScore], tip_stated: bool) -> str:
    """Return one sentence on what the readings say of the candidates' physics, best first."""
    shares: dict[str, float] = {}
    for score in scores:
        physics = score.name.removesuffix(SMOOTH_MISFIT).removesuffix(HEAVY_TAILS)
        shares[physics] = shares.get(physics, 0.0) + score.probability
    best = max(shares, key=lambda name: shares[name])
    if len(shares) == 1:
        return f"Only one model was posed, the {best}" + (" that the rig states." if tip_stated else ".")
    if shares[best] >= CLEAR:
        return f"The readings support the {best} (probability {shares[best]:.3g})."
    ordered = sorted(shares.items(), key=lambda item: -item[1])
    named = " and ".join(f"{name} ({share:.2g})" for name, share in ordered if share >= MENTIONED)
    return f"The readings cannot tell between {named}; the intervals average over them."
