"""What an engineer asks of a solved fin: efficiency, effectiveness, what the air takes, what is radiated."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.ends import ConvectiveTip, FixedTip, InfiniteTip
from finback.models.fin import Fin
from finback.models.nodes import Plan, nodes
from finback.models.sides import Shape
from finback.models.solution import Solution

Array = NDArray[np.float64]
Values = float | Array

RULE = Plan(24)
"""Places at which a coefficient that follows the place is taken: exact for lines between its breaks."""


def efficiency(fin: Fin, solution: Solution, air: Values) -> Array:
    """Return the fin efficiency [1], shape (n_sets,): base heat over its surface's, all at base temperature.

    Arguments: fin; its solution; air [K]. The base temperature is the fin's own, behind a joint if there is
    one. The tip face counts as surface where it loses heat as the side does, and not otherwise: with
    a tip that is held, goes on or has its own coefficient the value is no fraction and may leave 0 to 1. Any
    surface law keeps its own flux at base temperature, at each place, radiation included.
    nan where the base is at air temperature or nothing is lost.

    Examples:
    A pin with an adiabatic tip (Gavhane, Heat Transfer, Example 2.47, prints 0.962):

    >>> from finback.models import AdiabaticTip, BaseTemperature, UniformCoefficient, pin, solve
    >>> fin = Fin(pin(length=0.1, diameter=0.025), 200.0, UniformCoefficient(15.0), AdiabaticTip())
    >>> solution = solve(fin, BaseTemperature(523.0), air=288.0, x=np.array([0.1]))
    >>> round(float(efficiency(fin, solution, air=288.0)[0]), 3)
    0.962

    """
    hot = solution.base_temperature
    if fin.surface.uniform:
        ideal = fin.surface.flux(hot, air) * fin.profile.side_area()
    else:
        side = nodes(Shape(fin.profile, tuple(getattr(fin.surface, "breaks", ())), "free"), RULE)
        ideal = np.square(side.roots) @ fin.surface.flux(hot, air, side.places[:, None])
    if isinstance(fin.tip, ConvectiveTip) and fin.tip.coefficient is None:
        tip_area = float(fin.profile.area(np.array([fin.profile.length]))[0])
        ideal = ideal + fin.surface.flux(hot, air, 1.0) * tip_area
    return _ratio(solution.base_heat, ideal)


def effectiveness(fin: Fin, solution: Solution, air: Values) -> Array:
    """Return the fin effectiveness [1], shape (n_sets,): base heat over the bare base area's.

    Arguments: fin; its solution; air [K]. The bare base is the fin's cross-section at x = 0, at the fin's own
    base temperature and with the side's law there. nan where the base is at air temperature or nothing is
    lost.
    """
    base_area = float(fin.profile.area(np.zeros(1))[0])
    return _ratio(solution.base_heat, fin.surface.flux(solution.base_temperature, air) * base_area)


@dataclass(frozen=True, slots=True)
class HeatParts:
    """What a fin gives to its surroundings [W], each of shape (n_sets,).

    convective, to the air, from its side and from a tip face that convects; radiative, from its side and from
    a tip face that follows the law of the side.
    """

    convective: Array
    radiative: Array


def heat_parts(fin: Fin, solution: Solution) -> HeatParts:
    """Return what a solved fin gives to the air and what it radiates [W].

    Arguments: fin; its solution. Their sum is the base heat, less what leaves through a tip that is held or
    that goes on: there the parts are those of the length that was solved. A law without radiation has none,
    and its coefficient may hold some of it.

    Examples:
    A black pin in still air, of which more is radiated than the air takes:

    >>> from finback.models import AdiabaticTip, BaseTemperature, PowerCoefficient, Radiating, pin, solve
    >>> law = Radiating(PowerCoefficient(coefficient=5.0, exponent=0.25, reference=50.0), emissivity=0.95)
    >>> black = Fin(pin(length=0.1, diameter=0.008), 167.0, law, AdiabaticTip())
    >>> solution = solve(black, BaseTemperature(370.0), air=295.0, x=np.array([0.1]))
    >>> parts = heat_parts(black, solution)
    >>> parts.convective.round(2).tolist(), parts.radiative.round(2).tolist()
    ([0.9], [1.29])

    """
    elsewhere = isinstance(fin.tip, FixedTip | InfiniteTip)
    given = solution.base_heat - solution.tip_heat if elsewhere else solution.base_heat
    radiative = np.zeros_like(given) + solution.radiated_heat
    return HeatParts(given - radiative, radiative)


def _ratio(heat: Array, ideal: Array) -> Array:
    ideal = np.asarray(ideal, dtype=np.float64)
    return np.divide(heat, ideal, out=np.full_like(heat, np.nan), where=ideal != 0)
