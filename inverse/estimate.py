"""Estimates: what a fit found, frozen, with its status and where it came from."""

import math
import sys
import textwrap
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from html import escape
from importlib.metadata import version
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

import finback
from finback.expectation import Expected, ImpliedSpeed
from finback.findings import Finding
from finback.models.constants import ZERO_CELSIUS
from finback.quantity import format_number, format_value, pretty_unit
from finback.readings import Readings
from finback.rig import Rig

Array = NDArray[np.float64]
Status = Literal["ok", "caution", "failed"]
DeterminedBy = Literal["readings", "prior", "both"]
BudgetKind = Literal["random", "systematic", "prior"]


@dataclass(frozen=True, slots=True)
class Summary:
    """One reported number: posterior median, mean, sd and 95 % interval; least squares beside it.

    All values in `unit` (temperatures in degC). None: not determined, and a finding says why. A quantity
    bounded on one side only has low95 0 or None and a true high95, and no median.
    """

    name: str
    label: str
    unit: str
    median: float | None
    mean: float | None
    sd: float | None
    low95: float | None
    high95: float | None
    least_squares: float | None
    standard_error: float | None
    determined_by: DeterminedBy

    def in_words(self) -> str:
        """Return value, posterior sd and 95 % interval as text, or what is known instead."""
        if self.median is None or self.sd is None or self.low95 is None or self.high95 is None:
            if self.high95 is not None:
                return f"at most {format_number(self.high95)} {pretty_unit(self.unit)} (95 %)"
            return "not determined"
        low, high = format_number(self.low95), format_number(self.high95)
        return f"{format_value(self.median, self.sd, self.unit)} (95 %: {low} to {high})"


@dataclass(frozen=True, slots=True)
class CandidateScore:
    """How well one candidate explains the readings. `name` such as "convective tip, joint"."""

    name: str
    probability: float
    log_evidence: float
    log_evidence_error: float
    loo: float | None
    aicc: float | None
    bic: float | None


@dataclass(frozen=True, slots=True)
class ReadingFit:
    """One reading beside what the best candidate predicts for it (at its posterior median).

    Values in K (absolute) or W. `position` and its standard uncertainty [m], None off the fin.
    `uncertainty`: standard uncertainty of the reading, random and systematic together. `excluded`: why it was
    set aside, or None.
    """

    sensor: str
    place: str
    position: float | None
    position_sd: float
    measured: float
    predicted: float
    residual: float
    uncertainty: float
    excluded: str | None = None


@dataclass(frozen=True, slots=True)
class ProfileBand:
    """Temperature along the fin with its 95 % band: x [m], median, low95, high95 [K], each of shape (n,)."""

    x: Array
    median: Array
    low95: Array
    high95: Array


@dataclass(frozen=True, slots=True)
class Draws:
    """Posterior draws, in reported units.

    `names`; `units`; `values` (n_chains, n_draws, n_names), chains being independent ensembles; `prior`
    (n_prior, n_names), draws from the prior, nan where a quantity has none of its own. nan in `values` where
    the draw's candidate has no such quantity. `candidate` (n_chains, n_draws): which one a draw is from,
    0 being the best; `pointwise` (n_chains, n_draws, n_readings): log likelihood of each reading given the
    others; `sensors`, their names.
    """

    names: tuple[str, ...]
    units: tuple[str, ...]
    values: Array
    prior: Array
    candidate: NDArray[np.intp]
    pointwise: Array
    sensors: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class SamplerRecord:
    """How the posterior was drawn, and whether it converged."""

    method: str
    draws: int
    ess_min: float | None
    rhat_max: float | None
    seed: int
    converged: bool


@dataclass(frozen=True, slots=True)
class FitQuality:
    """Residuals of the best candidate [K or W] by sensor; chi-square, its degrees of freedom and p-value.

    p_value is None where the noise was estimated from the same residuals, or has heavy tails.
    """

    residuals: Mapping[str, float]
    chi_square: float
    degrees_of_freedom: int
    p_value: float | None
    noise: float | None  # estimated standard deviation of a reading [K], None when stated


@dataclass(frozen=True, slots=True)
class BudgetLine:
    """One source of uncertainty, and its share [1] of the variance of each quantity by name.

    The shares of a quantity add up to one over all lines.
    """

    source: str
    kind: BudgetKind
    share_of_variance: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Expanded:
    """Value ± U of one quantity, in its reported unit, U being k = 2 times the combined standard uncertainty.

    All of it is linear at the posterior's mode (JCGM 100:2008, clauses 5 and 6); `linear`: whether it says
    what the posterior's 95 % interval says.
    """

    value: float
    expanded: float
    linear: bool


@dataclass(frozen=True, slots=True)
class Improvement:
    """The one change of the rig that would narrow a quantity most.

    `quantity` by name; `source`, a line of the budget; `change` in words; `sd_ratio` [1], the quantity's
    standard uncertainty afterwards over that of now.
    """

    quantity: str
    source: str
    change: str
    sd_ratio: float


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """The candidates' probabilities by name with the prior of one parameter some `times_wider`."""

    prior: str
    times_wider: float
    probabilities: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Provenance:
    """Where a result came from: versions by package, and SHA-256 of each input file by name."""

    finback: str
    versions: Mapping[str, str]
    inputs: Mapping[str, str]


@dataclass(frozen=True)
class Estimate:
    """What a fit found.

    `parameters` and `derived`: summaries by name. `candidates`: best first. `comparison`: one sentence on
    what the readings say of the candidates, `compared` one on which there are and why. `priors`: one line of
    text a parameter, of what was assumed. `expected`: the coefficient that a healthy fin should have, where
    the rig tells; `implied_speed`: the air speed that the estimated one implies, where the rig speaks of
    moving air. `budget`: where the uncertainty is from; `expanded`: value ± U by quantity; `improvement`:
    what would help most, None where nothing helps much; `sensitivity`: what a wider prior of the joint would
    make of the candidates, None where no joint is compared.
    """

    rig: Rig
    readings: Readings
    status: Status
    parameters: Mapping[str, Summary]
    derived: Mapping[str, Summary]
    candidates: tuple[CandidateScore, ...]
    comparison: str
    compared: str
    fit: FitQuality
    table: tuple[ReadingFit, ...]
    band: ProfileBand
    draws: Draws
    sampler: SamplerRecord
    findings: tuple[Finding, ...]
    priors: tuple[str, ...]
    provenance: Provenance
    expected: Expected | None = None
    implied_speed: ImpliedSpeed | None = None
    budget: tuple[BudgetLine, ...] = ()
    expanded: Mapping[str, Expanded] = field(default_factory=dict)
    improvement: Improvement | None = None
    sensitivity: Sensitivity | None = None

    def to_dict(self) -> dict[str, Any]:
        """Return the contents of estimate.json, in its key order; a number that is not determined is None."""
        return {
            "finback": self.provenance.finback,
            "rig": self.rig.title,
            "run": self.readings.run,
            "status": self.status,
            "parameters": {name: _numbers(summary) for name, summary in self.parameters.items()},
            "derived": {name: _numbers(summary) for name, summary in self.derived.items()},
            "candidates": [rounded(asdict(score)) for score in self.candidates],
            "fit": rounded(asdict(self.fit)),
            "sampler": rounded(asdict(self.sampler)),
            "budget": [rounded(asdict(line)) for line in self.budget],
            "findings": [
                {"code": f.code, "severity": f.severity, "sensor": f.sensor, "message": f.message}
                for f in self.findings
            ],
            "expanded": {name: self._expanded(name) for name in self.expanded},
            "improvement": None if self.improvement is None else rounded(asdict(self.improvement)),
            "sensitivity": None if self.sensitivity is None else rounded(asdict(self.sensitivity)),
            **self._expectations(),
            "provenance": asdict(self.provenance),
        }

    def _expanded(self, name: str) -> dict[str, Any]:
        """Return value ± U of a quantity as estimate.json has it."""
        unit = {**self.parameters, **self.derived}[name].unit
        return {"unit": unit, **rounded(asdict(self.expanded[name]))}

    def _expectations(self) -> dict[str, Any]:
        """Return what estimate.json says of a healthy fin, nothing where nothing is known of one."""
        found: dict[str, Any] = {}
        if self.expected is not None:
            found["expected"] = rounded(_of_expected(self.expected))
        if self.implied_speed is not None:
            implied = asdict(self.implied_speed)
            shown = {"value": implied.pop("speed"), "sd": implied.pop("sd"), "unit": "m/s", **implied}
            found["implied_speed"] = rounded(shown)
        return found

    def to_tree(self) -> Any:
        """Return arviz's container of the posterior; its `to_netcdf(path, engine="h5netcdf")` writes it."""
        from finback import diagnostics

        draws = self.draws
        posterior = {name: draws.values[..., i] for i, name in enumerate(draws.names)}
        prior = {name: draws.prior[None, :, i] for i, name in enumerate(draws.names)}
        measured = {row.sensor: row.measured for row in self.table}
        groups: dict[str, dict[str, Array]] = {
            "posterior": posterior,
            "prior": {name: values for name, values in prior.items() if np.isfinite(values).all()},
            "sample_stats": {"candidate": draws.candidate.astype(np.float64)},
            "log_likelihood": {"reading": draws.pointwise},
            "observed_data": {"reading": np.array([measured[name] for name in draws.sensors])},
        }
        attributes = {
            "finback": self.provenance.finback,
            "rig": self.rig.title,
            "run": self.readings.run,
            "seed": str(self.sampler.seed),
            "candidates": "; ".join(score.name for score in self.candidates),
            "units": "; ".join(
                f"{name}: {unit}" for name, unit in zip(draws.names, draws.units, strict=True)
            ),
        }
        return diagnostics.tree(groups, draws.sensors, attributes)

    def __str__(self) -> str:
        """Return the main results as text that fits 80 columns."""
        lines = textwrap.wrap(f"{self.rig.title}, run {self.readings.run}: {self.status}", 80)
        for summary, value in self._shown():
            lines += textwrap.wrap(f"  {summary.label:<26} {value}", 80, subsequent_indent=29 * " ")
        lines += textwrap.wrap(self.comparison, 78, initial_indent="  ", subsequent_indent="  ")
        for finding in self.findings:
            if finding.severity != "note":
                text = f"{finding.severity}: {finding.message}"
                lines += textwrap.wrap(text, 78, initial_indent="  ", subsequent_indent="    ")
        return "\n".join(lines)

    def _repr_html_(self) -> str:
        """Return the main results as a table, for a notebook."""
        rows = "".join(
            f"<tr><td>{escape(s.label)}</td><td>{escape(value)}</td></tr>" for s, value in self._shown()
        )
        head = escape(f"{self.rig.title}, run {self.readings.run}: {self.status}")
        return f"<table><caption>{head}</caption>{rows}</table><p>{escape(self.comparison)}</p>"

    def _shown(self) -> list[tuple[Summary, str]]:
        everything = {**self.parameters, **self.derived}
        return [(everything[name], everything[name].in_words()) for name in SHOWN if name in everything]


SHOWN = ("h", "k", "joint", "h_over_k", "base_temperature", "heat", "efficiency")
"""What an estimate shows of itself, in this order."""

PACKAGES = ("numpy", "scipy", "emcee", "arviz", "pandas", "matplotlib")
"""Libraries whose versions stand in a result."""

DIGITS = 10  # significant ones in estimate.json: more than any number here has, fewer than rounding leaves


def _numbers(summary: Summary) -> dict[str, Any]:
    found = rounded(asdict(summary))
    return {name: value for name, value in found.items() if name not in ("name", "label")}


def _of_expected(expected: Expected) -> dict[str, Any]:
    film, speed = expected.film_temperature, expected.speed
    return {
        "h": {"value": expected.coefficient, "sd": expected.sd, "unit": "W/(m^2 K)"},
        "correlation": expected.correlation,
        "name": expected.name,
        "film_temperature": None if film is None else {"value": film - ZERO_CELSIUS, "unit": "degC"},
        "speed": None if speed is None else {"value": speed, "unit": "m/s"},
        "nusselt": expected.nusselt,
        "reynolds": expected.reynolds,
        "rayleigh": expected.rayleigh,
        "prandtl": expected.prandtl,
        "length": None
        if expected.length is None
        else {"value": expected.length, "unit": "m", "of": expected.length_name},
        "flags": list(expected.flags),
        "notes": list(expected.notes),
    }


def rounded(value: Any) -> Any:
    """Return nested values with floats rounded to DIGITS; a nan would be a defect and is refused."""
    if isinstance(value, Mapping):
        return {name: rounded(each) for name, each in value.items()}
    if isinstance(value, float):
        if not math.isfinite(value):
            raise ValueError(f"{value} is no result")
        return float(f"{value:.{DIGITS}g}")
    return value


def provenance(rig: Rig, readings: Readings) -> Provenance:
    """Return where a result of a run comes from: versions, and what its files hold."""
    files = [(rig.source, rig.sha256), (readings.source, readings.sha256)]
    if rig.shape_file is not None:
        files.append((rig.shape_file.source, rig.shape_file.sha256))
    inputs = {source.name: digest for source, digest in files if source is not None and digest is not None}
    versions = {"python": ".".join(map(str, sys.version_info[:3]))} | {
        name: version(name) for name in PACKAGES
    }
    return Provenance(finback.__version__, versions, inputs)
