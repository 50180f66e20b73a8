"""View of a diagnosis: everything that its page and its summary say, as text."""

from dataclasses import dataclass
from pathlib import PurePath
from typing import TypeGuard

from finback.causes import CLEAR, HEALTHY, LIKELY, NAMES, Cause
from finback.diagnosis import Diagnosis
from finback.findings import Finding
from finback.next_measurements import NARROWER, NextMeasurement
from finback.report import diagnosis_words, method, phrases
from finback.report.diagnosis_scenes import limits, middle, moves, signed
from finback.restoring import Interval
from finback.suspects import ODDS

SURE = 0.9  # probability from which no further measurement is asked for before it is put right
ARTICLES = ("A ", "An ", "Another ", "The ")
SAME = 0.1  # of the 95 % interval of the heat, within which a healthy fin does the same
LEAST_DOUBT = 0.01  # bits, below which there is none
SEVERITIES = ("fault", "caution", "note")

METHOD = (
    "Nothing wrong, each single cause in the fin, each fault of the measurement and pairs of them are held "
    "against the readings. The probability of each is its evidence, the probability of the readings averaged "
    "over everything that is uncertain with it, times how often such a thing is met; all of them together "
    "make 100 %. A cause’s probability counts it alone and together with another, so those in the table may "
    "add up to more. Put right means: that one thing as it should be in a healthy fin, with the uncertainty "
    "that rig.toml states of it, and everything else as it is; where a joint or a base is read, the plate, "
    "or else the base, keeps its temperature, and so does the air. Medians and 95 % intervals."
)


@dataclass(frozen=True, slots=True)
class CauseRow:
    """One row of the table of causes; `percent`: its probability as a length for the bar."""

    name: str
    probability: str
    percent: str
    message: str


@dataclass(frozen=True, slots=True)
class CostRow:
    """One row of the table of costs: heat and base temperature with their 95 % intervals.

    `more` and `warmer`: what a cause put right brings, by the fin that has it; "" for now and healthy.
    """

    what: str
    heat: str
    heat_interval: str
    base: str
    base_interval: str
    more: str
    warmer: str


@dataclass(frozen=True, slots=True)
class NextRow:
    """One thing to measure: what, what that is expected to tell, in words and bits, and what h gains."""

    what: str
    gain: str
    bits: str
    narrower: str


@dataclass(frozen=True, slots=True)
class FaultRow:
    """One finding."""

    severity: str
    code: str
    message: str


@dataclass(frozen=True, slots=True)
class DiagnosisView:
    """All that a diagnosis says, as text.

    `headline`, what is most likely wrong and how sure that is; `number`, how large that is; `cost`, in W and
    K; `action`, what to do; `left`, what the doubt is about that measurements would lessen.
    """

    title: str
    run: str
    status: str
    status_text: str
    headline: str
    number: str
    cost: str
    action: str
    causes: tuple[CauseRow, ...]
    together: tuple[str, ...]
    costs: tuple[CostRow, ...]
    cannot_tell: tuple[str, ...]
    next: tuple[NextRow, ...]
    left: str
    faults: tuple[FaultRow, ...]
    missing: tuple[str, ...]
    findings: tuple[FaultRow, ...]
    assumptions: tuple[str, ...]
    odds: str
    method: str
    provenance: tuple[tuple[str, str], ...]
    cautions: tuple[str, ...]
    version: str


def build(found: Diagnosis) -> DiagnosisView:
    """Return the view of a diagnosis."""
    told = leading(found)
    ill = bool(told) and told[0].kind != HEALTHY
    return DiagnosisView(
        title=phrases.clean(found.rig.title),
        run=phrases.clean(found.readings.run),
        status="caution" if ill or not told or found.missing else "ok",
        status_text=_status(found, told),
        headline=phrases.told(_headline(found, told)),
        number=_number(told),
        cost=_cost(found, told),
        action=_action(found, told),
        causes=tuple(_cause(cause) for cause in found.causes),
        together=tuple(
            f"{' and '.join(map(phrases.clean, pair.names))} at once: {phrases.probability(pair.probability)}"
            for pair in found.together
        ),
        costs=_costs(found),
        cannot_tell=tuple(phrases.told(sentence) for sentence in found.cannot_tell),
        next=tuple(_next(each, found.doubt) for each in found.next_measurements),
        left=_left(told),
        faults=_rows(found.measurement_faults),
        missing=tuple(phrases.told(sentence) for sentence in found.missing),
        findings=_rows(tuple(finding for finding in found.findings if finding.code != "assumed")),
        assumptions=tuple(phrases.told(f.message) for f in found.findings if f.code == "assumed"),
        odds=", ".join(f"{NAMES[kind]} {100 * odds:.0f}" for kind, odds in ODDS.items()),
        method=METHOD,
        provenance=_provenance(found),
        cautions=method.CAUTIONS,
        version=found.provenance.finback,
    )


def _status(found: Diagnosis, told: tuple[Cause, ...]) -> str:
    if not told:
        return "Not clear"
    if told[0].code != HEALTHY:
        return "Something is wrong"
    if told[0].kind != HEALTHY:
        return "Not as expected"
    return "Nothing found wrong in what could be judged" if found.missing else "Nothing found wrong"


def leading(found: Diagnosis) -> tuple[Cause, ...]:
    """Return what is spoken of: the likeliest cause, two that are likely at once, none where that is open."""
    named = {cause.name: cause for cause in found.causes}
    for pair in found.together[:1]:
        if pair.probability >= LIKELY and all(name in named for name in pair.names):
            return tuple(sorted((named[name] for name in pair.names), key=lambda each: -each.probability))
    first = found.causes[0]
    return (first,) if first.probability >= LIKELY else ()


def _headline(found: Diagnosis, told: tuple[Cause, ...]) -> str:
    if not told:
        rivals = [
            f"{'nothing is wrong' if cause.kind == HEALTHY else diagnosis_words.is_wrong(cause)} "
            f"({phrases.probability(cause.probability)})"
            for cause in found.causes[:2]
        ]
        return f"It is not clear what is wrong. Likeliest: {', or '.join(rivals)}."
    if told[0].kind == HEALTHY:
        judged = "Nothing seems wrong with what could be judged" if found.missing else "Nothing seems wrong"
        return f"{judged}, in the fin or in its readings: {_sure(told[0].probability)}."
    both = found.together[0].probability if len(told) > 1 else told[0].probability
    what = ", and ".join(diagnosis_words.is_wrong(cause) for cause in told)
    fin = found.fin_healthy_probability
    beside = ""
    if fin is not None and fin >= CLEAR:
        part = " as far as it could be judged" if found.missing else ""
        beside = f" The fin itself seems healthy{part} ({phrases.probability(fin)})."
    return f"{what[0].upper()}{what[1:]}: {_sure(both)}.{beside}"


def _sure(probability: float) -> str:
    return f"that is {diagnosis_words.surely(probability)} ({phrases.probability(probability)})"


def _number(told: tuple[Cause, ...]) -> str:
    """Return how large it is what is spoken of, without what it costs."""
    parts = [cause.message.partition("; put right")[0].rstrip(".") for cause in told if cause.kind != HEALTHY]
    return " ".join(f"{phrases.told(part)}." for part in parts)


def _left(told: tuple[Cause, ...]) -> str:
    if told and told[0].code != HEALTHY and told[0].probability >= SURE:
        return "The doubt that is left is about what else may be wrong."
    return ""


def _costs(found: Diagnosis) -> tuple[CostRow, ...]:
    """Return the table of costs, each line of a cause with what it brings."""
    rows = []
    for cost in found.costs:
        cause = next((one for one in found.causes if one.name == cost.cause), None)
        partly = bool(found.missing) and cost is found.costs[-1]
        rows.append(
            CostRow(
                phrases.clean(f"{cost.what}, as far as judged" if partly else cost.what),
                _from(cost.heat_now) + middle(cost.heat),
                limits(cost.heat),
                _from(cost.base_now) + middle(cost.base_temperature),
                limits(cost.base_temperature),
                _brought(cause.heat_recovered if cause else None),
                _brought(cause.base_temperature_change if cause else None),
            )
        )
    return tuple(rows)


def _from(now: Interval | None) -> str:
    return "" if now is None else f"{middle(now).rpartition(' ')[0]} → "


def _brought(change: Interval | None) -> str:
    return f"{signed(change)} ({limits(change)})" if moves(change) else ""


def _cost(found: Diagnosis, told: tuple[Cause, ...]) -> str:
    """Return what it costs, in W and in K."""
    now, healthy = found.costs[0], found.costs[-1]
    heat = told[0].heat_recovered if len(told) == 1 else None
    if _surely_moves(heat):
        base = told[0].base_temperature_change
        words = (
            f"That {'costs' if heat.median > 0 else 'adds'} {_between(heat)}: {middle(now.heat)} flow into "
            f"the fin now, {middle(healthy.heat)} would if it were healthy."
        )
        if _surely_moves(base):
            side = "hotter" if base.median > 0 else "cooler"
            words += f" Put right, the base of the fin would be {_between(base)} {side}."
        return words
    flows = f"{_between(now.heat)} flow into the fin, whose base has {middle(now.base_temperature)}"
    sound = found.fin_healthy_probability is None or found.fin_healthy_probability >= LIKELY
    if found.missing and sound:
        return f"{flows}. What a healthy fin would do cannot be told in full: see “What could not be judged”."
    if abs(healthy.heat.median - now.heat.median) < SAME * (now.heat.high95 - now.heat.low95):
        return f"{flows}; a healthy fin does the same."
    return (
        f"{flows}; if all were right, {_between(healthy.heat)} would, and the base would have "
        f"{middle(healthy.base_temperature)}."
    )


def _surely_moves(change: Interval | None) -> TypeGuard[Interval]:
    """Tell whether a change is known to be one, by its 95 % interval."""
    return change is not None and (change.low95 > 0 or change.high95 < 0)


def _between(change: Interval) -> str:
    """Return a change without its sign, with its interval: "1.61 W (95 %: 1.32 to 1.80)"."""
    ends = sorted((abs(change.low95), abs(change.high95)))
    size = Interval(abs(change.median), ends[0], ends[1], change.unit)
    return f"{middle(size)} (95 %: {limits(size)})"


def _action(found: Diagnosis, told: tuple[Cause, ...]) -> str:
    """Return what to do: put right what is likely, measure while that is not sure, add what is missing."""
    steps = [diagnosis_words.repair(cause) for cause in told]
    if told and told[0].kind == HEALTHY and not found.missing:
        steps.append("nothing needs to be done")
    unsure = not told or told[0].probability < SURE
    if unsure and found.next_measurements:
        before = "to be surer" if told else "before anything is changed"
        steps.append(f"{before}, add this measurement: {_inside(_what(found.next_measurements[0]))}")
    if found.missing:
        add = "add to rig.toml the lines under “What could not be judged”, and run this again"
        steps.insert(0 if told and told[0].kind == HEALTHY else len(steps), add)
    sentences = (diagnosis_words.sentence(phrases.clean(step, 500)) for step in steps if step)
    return " ".join(sentences)


def _cause(cause: Cause) -> CauseRow:
    return CauseRow(
        phrases.clean(cause.name),
        phrases.probability(cause.probability),
        f"{100 * cause.probability:.1f}",
        phrases.told(cause.message),
    )


def _what(each: NextMeasurement) -> str:
    return phrases.told(each.how)


def _inside(words: str) -> str:
    """Return words as they stand inside a sentence: a sensor's name keeps its capital."""
    return f"{words[0].lower()}{words[1:]}" if words.startswith(ARTICLES) else words


def _next(each: NextMeasurement, open_bits: float) -> NextRow:
    doubtful = open_bits >= LEAST_DOUBT
    narrower = 100 * (1 - each.h_sd_ratio)
    return NextRow(
        _what(each),
        diagnosis_words.settles(each.expected_gain / open_bits) if doubtful else diagnosis_words.SETTLED,
        f"{each.expected_gain:.2f} of {open_bits:.2f} bit" if doubtful else phrases.NOTHING,
        f"{narrower:.0f} % narrower" if each.h_sd_ratio < NARROWER else "as now",
    )


def _rows(findings: tuple[Finding, ...]) -> tuple[FaultRow, ...]:
    rows = [FaultRow(f.severity, f.code, phrases.told(f.message)) for f in findings]
    return tuple(sorted(rows, key=lambda row: SEVERITIES.index(row.severity)))


def _provenance(found: Diagnosis) -> tuple[tuple[str, str], ...]:
    source = found.provenance
    return (
        ("Finback", source.finback),
        ("with", ", ".join(f"{name} {version}" for name, version in source.versions.items())),
        *(
            (f"SHA-256 of {phrases.clean(PurePath(name).name)}", digest)
            for name, digest in source.inputs.items()
        ),
    )
