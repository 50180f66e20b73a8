"""Quantities: numbers with units and uncertainties, as text and as SI values. The only module that uses pint."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Quantity:
    """A value with its standard uncertainty, in SI units (K for temperatures).

    Arguments: value; sd, its standard uncertainty, 0 when exactly known; text, as the user wrote it.
    """

    value: float
    sd: float = 0.0
    text: str = ""
