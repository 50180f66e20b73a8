"""Handbook: the conductivity that [material] states or that its name stands for, and what to say of it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from finback.errors import InputError
from finback.findings import Finding
from finback.models.materials import Material, find
from finback.models.names import UnknownNameError
from finback.quantity import Quantity, format_value
from finback.wording import plain, quoted

if TYPE_CHECKING:
    from finback.rig_file import MaterialSection

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


def findings(material: Material, temperature: float) -> tuple[Finding, ...]:
    """Return what must be said of a conductivity taken for a material's name at a temperature [K]."""
    taken = conductivity(material, temperature)
    shown = format_value(taken.value, taken.sd, "W/(m K)")
    message = (
        f"The conductivity of {material.name} is a handbook's at {temperature - 273.15:.0f} °C, {shown}: "
        f"{material.source}; state conductivity in [material] where more is known of the piece."
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
