"""Handbook: the conductivity that [material] states or that its name stands for, and what to say of it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from finback.errors import InputError
from finback.findings import Finding
from finback.models import LinearConductivity
from finback.models.materials import Material, find
from finback.models.names import UnknownNameError
from finback.quantity import Quantity, format_value
from finback.wording import plain, quoted

if TYPE_CHECKING:
    from finback.rig_file import MaterialSection

NOTABLE = 0.01
"""Share of itself [1] that a handbook's conductivity must change by, along a fin, to be taken as changing."""
REACH = 0.8
"""Share of k [1] by which a straight line may leave it, up or down."""
USUAL = 293.15
"""Temperature [K] that a stated conductivity belongs to where none is stated: 20 °C, as on data sheets."""

ROOM = 300.0
"""Temperature [K] at which a conductivity is taken as long as no reading says how warm the fin is."""


def look_up(name: str, source: Path | None) -> Material:
    """Return the material of a name. Raises InputError, with the nearest names, for one that is not known."""
    try:
        return find(name)
    except UnknownNameError as error:
        near = ", ".join(map(quoted, error.nearest))
        remedy = f"the nearest known ones are {near}; or state conductivity"
        raise InputError(source, "[material] name", f"{quoted(name)} is no known material", remedy) from None


def conductivity(material: Material, temperature: float) -> Quantity:
    """Return a material's conductivity [W/(m K)] at a temperature [K], its usual spread as uncertainty."""
    k, sd, _ = material.at(temperature)
    value, spread = float(k), float(sd)
    return Quantity(value, spread, f"{value:.4g} W/(m K) +/- {100 * spread / value:.2g} %")


@dataclass(frozen=True, slots=True)
class Change:
    """How a conductivity follows the temperature: k (1 + b (T - T0)), a line over a fin's temperatures.

    Arguments: reference T0 [K], the temperature that k belongs to; coefficient b [1/K].
    """

    reference: float
    coefficient: float

    @property
    def temperatures(self) -> tuple[float, float]:
        """Lowest and highest temperature [K] where the line holds: no fin that was measured is beyond."""
        reach = REACH / abs(self.coefficient) if self.coefficient else np.inf
        return max(self.reference - reach, 0.0), self.reference + reach

    def law(self, k: float | NDArray[np.float64]) -> LinearConductivity:
        """Return the law whose conductivity at the reference is k [W/(m K)], a float or (n_sets,)."""
        return LinearConductivity(k, self.reference, self.coefficient, *self.temperatures)


def change(material: Material, temperature: float, spread: tuple[float, float] | None) -> Change | None:
    """Return how a material's conductivity changes between two temperatures [K], None where it hardly does.

    By the straight line through both: the kinks of a table would only cost time.
    """
    if spread is None or spread[1] <= spread[0]:
        return None
    cold, middle, hot = (float(material.at(t)[0]) for t in (spread[0], temperature, spread[1]))
    if abs(hot - cold) < NOTABLE * middle:
        return None
    return Change(temperature, (hot - cold) / (spread[1] - spread[0]) / middle)


def stated_change(material: MaterialSection) -> Change | None:
    """Return how a stated conductivity follows the temperature, if [material] says so."""
    if material.temperature_coefficient is None or material.temperature_coefficient.value == 0:
        return None
    reference = material.reference_temperature
    return Change(USUAL if reference is None else reference.value, material.temperature_coefficient.value)


def findings(material: Material, temperature: float, follows: Change | None = None) -> tuple[Finding, ...]:
    """Return what must be said of a conductivity taken for a material's name at a temperature [K]."""
    taken = conductivity(material, temperature)
    shown = format_value(taken.value, taken.sd, "W/(m K)")
    changing = "" if follows is None else f", changing by {100 * follows.coefficient:.2g} % a kelvin"
    message = (
        f"The conductivity of {material.name} is a handbook's at {temperature - 273.15:.0f} °C, {shown}"
        f"{changing}: {material.source}; state conductivity in [material] where more is known of the piece."
    )
    evidence: dict[str, float | str] = {"key": "material", "value": taken.value, "temperature": temperature}
    found = [Finding("assumed", "note", message, evidence=evidence)]
    *_, flags = material.at(temperature)
    found += [Finding("out-of-range", "note", str(flag), evidence={"key": "material"}) for flag in flags]
    return tuple(found)


def without(found: Iterable[Finding]) -> tuple[Finding, ...]:
    """Return the findings that do not speak of a material that was looked up."""
    return tuple(each for each in found if each.evidence.get("key") != "material")


def assumed(material: MaterialSection) -> Iterator[Finding]:
    """Yield a finding for each default of the material that was used, but for what its name stands for."""
    stated = material.conductivity
    if material.temperature_coefficient is not None and material.reference_temperature is None:
        yield Finding(
            "assumed",
            "note",
            "No reference_temperature is stated: the conductivity is taken to belong to 20 °C.",
            evidence={"key": "reference_temperature", "value": USUAL},
        )
    if stated is None and material.name is None:
        yield Finding(
            "assumed",
            "note",
            "No conductivity is stated: k is left free within a wide prior; state it with "
            'conductivity = "167 W/(m K) +/- 5 %" in [material].',
            evidence={"key": "conductivity"},
        )
    if stated is not None and not stated.states_uncertainty:
        shown = plain(stated.text)
        yield Finding(
            "assumed",
            "note",
            f"The conductivity {quoted(stated.text)} is stated without an uncertainty: it is taken as exact; "
            f'state one in [material], such as "{shown} +/- 5 %", or "{shown} +/- 0 %" if it is exact.',
            evidence={"key": "conductivity", "value": stated.value},
        )
