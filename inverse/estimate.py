"""Estimates: what a fit found, frozen, with its status and where it came from."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from finback.findings import Finding
from finback.readings import Readings
from finback.rig import Rig

Array = NDArray[np.float64]
Status = Literal["ok", "caution", "failed"]
DeterminedBy = Literal["readings", "prior", "both"]


@dataclass(frozen=True, slots=True)
class Summary:
    """One reported number: posterior median, mean, standard deviation and 95 % interval; least squares beside it.

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

    Values in K (absolute) or W. `uncertainty`: standard uncertainty of the reading, random and systematic
    together. `excluded`: why it was set aside, or None.
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
    (n_prior, n_names), draws from the prior, nan where a quantity has none of its own.
    """

    names: tuple[str, ...]
    units: tuple[str, ...]
    values: Array
    prior: Array


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

    p_value is None where the noise was estimated from the same residuals.
    """

    residuals: Mapping[str, float]
    chi_square: float
    degrees_of_freedom: int
    p_value: float | None
    noise: float | None  # estimated standard deviation of a reading [K], None when stated


@dataclass(frozen=True, slots=True)
class Provenance:
    """Where a result came from: versions by package, and SHA-256 of each input file by name."""

    finback: str
    versions: Mapping[str, str]
    inputs: Mapping[str, str]


@dataclass(frozen=True)
class Estimate:
    """What a fit found.

    `parameters` and `derived`: summaries by name. `candidates`: best first. `comparison`: one sentence on what
    the readings say of the candidates. `priors`: one line of text a parameter, for the list of assumptions.
    """

    rig: Rig
    readings: Readings
    status: Status
    parameters: Mapping[str, Summary]
    derived: Mapping[str, Summary]
    candidates: tuple[CandidateScore, ...]
    comparison: str
    fit: FitQuality
    table: tuple[ReadingFit, ...]
    band: ProfileBand
    draws: Draws
    sampler: SamplerRecord
    findings: tuple[Finding, ...]
    priors: tuple[str, ...]
    provenance: Provenance

    def to_dict(self) -> dict[str, Any]:
        """Return the contents of estimate.json, in its key order; never a nan."""
        raise NotImplementedError
