"""Readings: what was measured in one run. Reads readings.csv and .xlsx."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType


@dataclass(frozen=True)
class Readings:
    """The readings of one run, in SI units: temperatures in K (absolute), heat in W.

    `values`: sensor name -> value, measured ones only. `excluded`: sensor name -> why its value is set aside
    (the value stays in `values`). `extra`: the table's other columns as text.
    """

    run: str
    values: Mapping[str, float]
    excluded: Mapping[str, str] = field(default_factory=dict)
    extra: Mapping[str, str] = field(default_factory=dict)
    source: Path | None = None
    sha256: str | None = None

    def __post_init__(self) -> None:
        for name in ("values", "excluded", "extra"):
            object.__setattr__(self, name, MappingProxyType(dict(getattr(self, name))))
