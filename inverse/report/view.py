"""View: everything a report says, computed from an estimate and frozen. Templates hold no arithmetic.

All text here is plain; each output escapes it in its own way.
"""

from dataclasses import dataclass
from pathlib import PurePath

from finback.estimate import CandidateScore, Estimate, Expanded, ReadingFit, Sensitivity, Summary
from finback.findings import Finding
from finback.problem import HEAVY_TAILS
from finback.report import comparison, method, phrases, shares
from finback.report.comparison import Comparison
from finback.report.method import Equation
from finback.report.shares import Shares

ZERO_CELSIUS = 273.15
SEVERITIES = ("fault", "caution", "note")
PLACES = {
    "fin": "fin",
    "plate": "plate",
    "air": "air",
    "heat": "heat into the fin",
    "heater": "heater",
}
UPPER_BOUND = "heater (upper bound)"
COEFFICIENTS = {
    False: "total coefficient: convection and radiation together",
    True: "convective coefficient, radiation beside it",
}
HEADLINES = ("h", "k", "joint")
STAND_INS = {
    "h_over_k": {"h", "k"},
    "joint_times_k": {"R″"},
}  # what is told where one of those is not determined
SHOWN_FIRST = 3  # findings in the first screen


@dataclass(frozen=True, slots=True)
class Answer:
    """One headline: `value` with its uncertainty, or a verdict such as "not determined" with its `reason`.

    `relation` stands between symbol and value; `coverage` goes with a value stated with ±; `bent`: what a
    linear uncertainty would be where it does not hold.
    """

    symbol: str
    label: str
    relation: str
    value: str
    coverage: str
    median: str
    interval: str
    determined_by: str
    reason: str
    bent: str = ""


@dataclass(frozen=True, slots=True)
class QuantityRow:
    """One row of the table of quantities; `expanded`: value ± U, marked where linearity does not hold."""

    symbol: str
    label: str
    unit: str
    median: str
    interval: str
    expanded: str
    least_squares: str
    determined_by: str


@dataclass(frozen=True, slots=True)
class CandidateRow:
    """One row of the table of candidates; `widened`: its probability with a wider prior of the joint."""

    name: str
    probability: str
    widened: str
    log_evidence: str
    loo: str
    aicc: str
    bic: str


@dataclass(frozen=True, slots=True)
class ReadingRow:
    """One row of the table of readings; `ratio` is residual over uncertainty."""

    sensor: str
    place: str
    position: str
    measured: str
    predicted: str
    residual: str
    uncertainty: str
    ratio: str
    excluded: str


@dataclass(frozen=True, slots=True)
class FindingRow:
    """One finding."""

    severity: str
    code: str
    sensor: str
    message: str


@dataclass(frozen=True, slots=True)
class View:
    """All that a report says, as text."""

    title: str
    run: str
    status: str
    status_text: str
    answers: tuple[Answer, ...]
    verdict: str
    compared: str
    parts: str
    healthy: Comparison | None
    worst: tuple[FindingRow, ...]
    more_findings: str
    candidates: tuple[CandidateRow, ...]
    loo_note: str
    widened_note: str
    quantities: tuple[QuantityRow, ...]
    shares: Shares | None
    improvement: str
    readings: tuple[ReadingRow, ...]
    fit: str
    findings: tuple[FindingRow, ...]
    assumptions: tuple[str, ...]
    priors: tuple[str, ...]
    method: str
    equations: tuple[Equation, ...]
    provenance: tuple[tuple[str, str], ...]
    cautions: tuple[str, ...]
    version: str


def build(estimate: Estimate) -> View:
    """Return the view of an estimate."""
    findings = _findings(estimate.findings)
    told = [row for row in findings if row.severity != "note"] or [
        row for row in findings if row.code == "healthy"
    ]
    worst = tuple(told[:SHOWN_FIRST])
    rest = len(findings) - len(worst)
    return View(
        title=phrases.clean(estimate.rig.title),
        run=phrases.clean(estimate.readings.run),
        status=estimate.status,
        status_text=phrases.STATUS[estimate.status],
        answers=_answers(estimate),
        verdict=phrases.told(estimate.comparison),
        compared=phrases.told(estimate.compared),
        parts=_parts(estimate),
        healthy=comparison.compare(estimate),
        worst=worst,
        more_findings=f"{rest} more in the list of findings." if rest > 0 and worst else "",
        candidates=tuple(_candidate(estimate, score) for score in estimate.candidates),
        loo_note=_loo_note(estimate),
        widened_note=_widened_note(estimate.sensitivity),
        quantities=tuple(
            _quantity(summary, estimate.expanded.get(name))
            for name, summary in (*estimate.parameters.items(), *estimate.derived.items())
        ),
        shares=shares.table(estimate),
        improvement=shares.improved(estimate.improvement),
        readings=tuple(_reading(row, estimate.rig.losses_stated) for row in estimate.table),
        fit=_fit(estimate),
        findings=findings,
        assumptions=tuple(phrases.told(f.message) for f in estimate.findings if f.code == "assumed"),
        priors=tuple(phrases.told(phrases.pretty(line)) for line in estimate.priors),
        method=method.paragraph(estimate.rig),
        equations=method.equations(estimate),
        provenance=_provenance(estimate),
        cautions=method.CAUTIONS,
        version=estimate.provenance.finback,
    )


def _answers(estimate: Estimate) -> tuple[Answer, ...]:
    """Return the headlines: h, k and the joint, then what is determined in the stead of one that is not."""
    answers = []
    for name in HEADLINES:
        summary = estimate.parameters.get(name)
        answers.append(_answer(estimate, name, summary) if summary else _absent(estimate, name))
    missing = {answer.symbol for answer in answers if answer.value == phrases.NOT_DETERMINED}
    for name, summary in estimate.derived.items():
        if summary.median is not None and missing & STAND_INS.get(name, set()):
            answers.append(_answer(estimate, name, summary))
    return tuple(answers)


def _answer(estimate: Estimate, name: str, summary: Summary) -> Answer:
    label = _label(summary)
    known = summary.median is not None
    if name == "h":
        label = COEFFICIENTS["emissivity" in estimate.parameters]
    return Answer(
        symbol=phrases.symbol(name),
        label=label,
        relation=" = " if known else " ",
        value=phrases.value(summary),
        coverage=phrases.COVERAGE if phrases.symmetric(summary) else "",
        median=phrases.NOTHING if summary.sd == 0 else phrases.median(summary),
        interval=phrases.interval(summary),
        determined_by=phrases.determined_by(summary),
        reason="" if known else _reason(estimate, summary),
        bent=phrases.bent(estimate.expanded.get(name), summary.unit) if known else "",
    )


def _parts(estimate: Estimate) -> str:
    """Return how the fin's heat parts into what the air takes and what is radiated, if that is known."""
    air, radiated = (estimate.derived.get(name) for name in ("heat_convected", "heat_radiated"))
    if air is None or radiated is None or air.median is None or radiated.median is None:
        return ""
    return (
        f"The air takes {phrases.median(air)} of the fin's heat ({phrases.interval(air)}), "
        f"{phrases.median(radiated)} are radiated ({phrases.interval(radiated)})."
    )


def _absent(estimate: Estimate, name: str) -> Answer:
    """Return the headline of a quantity that was no unknown of this fit."""
    label, value, reason = {
        "h": (COEFFICIENTS[False], phrases.NOT_DETERMINED, "It was not fitted."),
        "k": ("conductivity", phrases.NOT_DETERMINED, "It was not fitted."),
        "joint": (
            "joint resistance",
            "not looked at",
            "It needs a temperature on the plate side of the joint.",
        ),
    }[name]
    stated = estimate.rig.conductivity
    if name == "k" and stated is not None and stated.sd == 0:
        value, reason = (
            phrases.number(stated.value, 0.0, "W/(m K)"),
            "Taken as exactly known, as the rig states.",
        )
    return Answer(phrases.symbol(name), label, " ", value, "", phrases.NOTHING, phrases.NOTHING, "", reason)


def _reason(estimate: Estimate, summary: Summary) -> str:
    """Return the sentence of the finding that says why a quantity is not determined."""
    told = [finding for finding in estimate.findings if finding.code == "not-determined"]
    for finding in told:
        named = {str(value) for key, value in finding.evidence.items() if key in ("quantity", "parameter")}
        if summary.name in named or summary.name in finding.evidence:
            return phrases.told(finding.message)
    for finding in told:
        words = finding.message.replace(",", " ").replace(":", " ").split()
        if summary.name in words or summary.label in finding.message:
            return phrases.told(finding.message)
    return phrases.told(told[0].message) if told else ""


def _label(summary: Summary) -> str:
    """Return the label without the symbol that stands beside it anyway."""
    label = phrases.told(summary.label)
    for mark in ("h", "k", "m", "R″"):
        label = label.removesuffix(f" {mark}")
    return label


def _quantity(summary: Summary, expanded: Expanded | None) -> QuantityRow:
    determined = summary.median is not None
    return QuantityRow(
        phrases.symbol(summary.name),
        _label(summary),
        phrases.pretty(summary.unit),
        phrases.median(summary, unit=False) if determined else phrases.NOT_DETERMINED,
        phrases.interval(summary, unit=False),
        phrases.expanded(expanded),
        phrases.least_squares(summary),
        phrases.determined_by(summary, short=True) or phrases.NOTHING,
    )


def _candidate(estimate: Estimate, score: CandidateScore) -> CandidateRow:
    alone, sensitivity = len(estimate.candidates) == 1, estimate.sensitivity
    widened = None if sensitivity is None else sensitivity.probabilities.get(score.name)
    return CandidateRow(
        phrases.clean(score.name),
        phrases.probability(score.probability, alone),
        phrases.NOTHING if widened is None else phrases.probability(widened, alone),
        f"{phrases.number(score.log_evidence, 0.1)} ± {score.log_evidence_error:.2g}",
        phrases.number(score.loo, 1.0),
        phrases.number(score.aicc, 1.0),
        phrases.number(score.bic, 1.0),
    )


def _reading(row: ReadingFit, losses_stated: bool) -> ReadingRow:
    # the model may stay below a bound, so the difference is no residual
    bound = row.place == "heater" and not losses_stated
    thermal = row.place not in ("heat", "heater")
    zero, unit, unit_of_difference = (ZERO_CELSIUS, "degC", "K") if thermal else (0.0, "W", "W")
    position = phrases.NOTHING
    if row.position is not None:
        position = f"{_position(row.position, row.position_sd)} mm"
    return ReadingRow(
        phrases.clean(row.sensor),
        UPPER_BOUND if bound else PLACES.get(row.place, row.place),
        position,
        phrases.number(row.measured - zero, row.uncertainty, unit),
        phrases.number(row.predicted - zero, row.uncertainty, unit),
        phrases.NOTHING if bound else phrases.number(row.residual, row.uncertainty, unit_of_difference),
        phrases.number(row.uncertainty, row.uncertainty, unit_of_difference),
        phrases.NOTHING
        if bound or not row.uncertainty
        else phrases.number(row.residual / row.uncertainty, 1.0),
        phrases.clean(row.excluded) if row.excluded else "",
    )


def _position(position: float, sd: float) -> str:
    return phrases.compact(1e3 * position, 1e3 * sd) if sd else phrases.number(1e3 * position, 0.0)


def _findings(findings: tuple[Finding, ...]) -> tuple[FindingRow, ...]:
    """Return the findings, worst first, each sentence once; assumptions have their own list."""
    rows: dict[str, FindingRow] = {}
    for finding in sorted(findings, key=lambda finding: SEVERITIES.index(finding.severity)):
        if finding.code != "assumed":
            message = phrases.told(finding.message)
            sensor = phrases.clean(finding.sensor or "")
            rows.setdefault(message, FindingRow(finding.severity, finding.code, sensor, message))
    return tuple(rows.values())


def _loo_note(estimate: Estimate) -> str:
    if all(score.loo is None for score in estimate.candidates):
        return ""
    n = len(estimate.draws.sensors)  # a heater only bounds the heat and is not left out
    return (
        "LOO: log density expected for each reading when it is left out, summed. "
        f"Few readings make LOO indicative only; here there are {n}."
    )


def _widened_note(sensitivity: Sensitivity | None) -> str:
    if sensitivity is None:
        return ""
    return (
        "With a wider prior: the probability if the prior of ln R″ were "
        f"{sensitivity.times_wider:g} times as wide. Where it differs much, the width of that prior decides, "
        "a choice of ours, and not the readings."
    )


def _fit(estimate: Estimate) -> str:
    fit = estimate.fit
    text = f"χ² = {fit.chi_square:.3g} with {fit.degrees_of_freedom} degrees of freedom"
    if fit.p_value is not None:
        return f"{text}, p = {fit.p_value:.2g}."
    if fit.noise is not None:
        return f"{text}; no test, since the noise of a reading, {fit.noise:.2g} K, was estimated from them."
    if HEAVY_TAILS in estimate.candidates[0].name:
        return f"{text}; no test, since readings with heavy tails do not add up to that distribution."
    return f"{text}."


def _provenance(estimate: Estimate) -> tuple[tuple[str, str], ...]:
    sampler, source = estimate.sampler, estimate.provenance
    ess = phrases.NOTHING if sampler.ess_min is None else f"{sampler.ess_min:.0f}"
    rhat = phrases.NOTHING if sampler.rhat_max is None else f"{sampler.rhat_max:.3f}"
    converged = "converged" if sampler.converged else "not converged"
    return (
        ("Finback", source.finback),
        ("with", ", ".join(f"{name} {version}" for name, version in source.versions.items())),
        ("seed", str(sampler.seed)),
        ("sampler", f"{phrases.clean(sampler.method)}; {sampler.draws} draws, {converged}"),
        ("diagnostics", f"largest R-hat {rhat}, smallest effective sample size {ess}"),
        *(
            (f"SHA-256 of {phrases.clean(PurePath(name).name)}", digest)
            for name, digest in source.inputs.items()
        ),
    )
