"""Findings: what the engineer must know beside the numbers, each a code, a severity and one sentence."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

Severity = Literal["note", "caution", "fault"]

CODES = (
    "not-determined",
    "misfit",
    "sensor-outlier",
    "sensor-swap",
    "position-shift",
    "air-reference",
    "heat-balance",
    "thick-fin",
    "out-of-range",
    "not-converged",
    "not-steady",
    "assumed",
    "joint",
    "low-conductivity",
    "low-convection",
    "healthy",
)


@dataclass(frozen=True, slots=True)
class Finding:
    """One finding.

    Arguments: code, one of CODES; severity; message, one sentence for the engineer; sensor it concerns, or
    None; evidence, the numbers behind it by name.
    Raises ValueError for a code that is not listed.
    """

    code: str
    severity: Severity
    message: str
    sensor: str | None = None
    evidence: Mapping[str, float | str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        if self.code not in CODES:
            raise ValueError(f"unknown finding code {self.code!r}")
