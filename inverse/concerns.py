"""Concerns: what the engineer must know beside the numbers: findings, and a sentence on the candidates."""

from collections.abc import Mapping, Sequence

from finback.candidates import Outcome
from finback.estimate import CandidateScore, FitQuality, SamplerRecord, Summary
from finback.findings import Finding, Severity
from finback.models.validity import TRANSVERSE_BIOT_LIMIT
from finback.rig import Rig

MISFIT_P = 0.01
CLEAR = 0.9  # probability from which the readings are said to support a candidate
MENTIONED = 0.05  # and below which one is not named among those that cannot be told apart
HEATER_MARGIN = 2.0  # standard uncertainties of its power

APART = "state the conductivity or measure the heat into the fin"


def collect(
    rig: Rig, found: Mapping[str, Summary], quality: FitQuality, sampler: SamplerRecord, best: Outcome
) -> tuple[Finding, ...]:
    """Return the findings of a fit, gravest first."""
    everything = [
        *_undetermined(rig, found, best),
        *_misfit(quality),
        *_validity(found),
        *_heater(found, best),
        *_convergence(sampler),
        *rig.assumed,
    ]
    gravity = {"fault": 0, "caution": 1, "note": 2}
    return tuple(sorted(everything, key=lambda f: gravity[f.severity]))


def _undetermined(rig: Rig, found: Mapping[str, Summary], best: Outcome) -> list[Finding]:
    """Return a finding for each quantity that is null, in the engineer's terms."""
    findings = []
    read = {s.place for s in best.problem.measured.sensors}
    parted = "heat" in read or rig.conductivity is not None
    ratio, product = found["h_over_k"], found["joint_times_k"]

    def add(message: str, severity: Severity = "caution") -> None:
        findings.append(Finding("not-determined", severity, message))

    for name in ("h", "k"):
        if found[name].median is None:
            if ratio.median is not None and not parted:
                text = f"{name} is not determined: the temperatures give only h/k = {ratio.median:.4g} 1/m"
                add(f"{text}; {APART}.")
            elif found[name].high95 is not None:
                add(
                    f"{name} is only limited: at most {found[name].high95:.3g} {found[name].unit} (95 %).",
                )
            else:
                add(f"{name} is not determined by these readings.")
    joint = found["joint"]
    if joint.median is None:
        if not best.problem.candidate.joint_possible:
            add(
                "The joint is not determined: that needs a temperature on the plate side of it.",
                "note",
            )
        elif product.median is not None and not parted:
            text = f"The joint is not determined: the readings give only R''·k = {product.median:.4g} m"
            add(f"{text}; {APART}.")
        elif joint.high95 is not None:
            text = f"The joint is too good for these readings: at most {joint.high95:.2g} m² K/W (95 %)"
            add(f"{text}.", "note")
        else:
            add("The joint is not determined by these readings.")
    if ratio.median is None:
        add("h/k is not determined: the temperatures along the fin don't tell how fast they fall.")
    if found["base_temperature"].median is None:
        add("The base temperature is not determined by these readings.")
    return findings


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


def _validity(found: Mapping[str, Summary]) -> list[Finding]:
    biot = found["transverse_biot"].median
    if biot is None or biot <= TRANSVERSE_BIOT_LIMIT:
        return []
    message = (
        f"The transverse Biot number is {biot:.2g}, above {TRANSVERSE_BIOT_LIMIT:g}: the temperature is not "
        "uniform across the fin, and the one-dimensional model does not hold."
    )
    return [Finding("thick-fin", "caution", message, evidence={"transverse_biot": biot})]


def _heater(found: Mapping[str, Summary], best: Outcome) -> list[Finding]:
    """Return a finding where even the least heat that the readings allow is more than a heater supplies."""
    least = found["heat"].low95
    measured = best.problem.measured
    if least is None:
        return []
    findings = []
    for sensor, power, sd in zip(measured.bounds, measured.bound_values, measured.bound_sds, strict=True):
        if least > power + HEATER_MARGIN * sd:
            message = (
                f"At least {least:.3g} W must flow into the fin, but {sensor.name} supplies {power:.3g} W: "
                "the heat balance is impossible."
            )
            findings.append(Finding("heat-balance", "fault", message, sensor=sensor.name))
    return findings


def _convergence(sampler: SamplerRecord) -> list[Finding]:
    if sampler.converged:
        return []
    message = (
        f"The sampler has not converged (largest R-hat {sampler.rhat_max:.3g}, smallest effective sample "
        f"{sampler.ess_min:.0f}): treat every interval as provisional."
    )
    return [Finding("not-converged", "caution", message)]


def compare_in_words(scores: Sequence[CandidateScore], tip_stated: bool) -> str:
    """Return one sentence on what the readings say of the candidates, best first."""
    best = scores[0]
    if len(scores) == 1:
        return f"Only one model was posed, the {best.name}" + (" that the rig states." if tip_stated else ".")
    if best.probability >= CLEAR:
        return f"The readings support the {best.name} (probability {best.probability:.3g})."
    rivals = [s for s in scores if s.probability >= MENTIONED]
    named = " and ".join(f"{s.name} ({s.probability:.2g})" for s in rivals)
    return f"The readings cannot tell between {named}; the intervals average over them."
