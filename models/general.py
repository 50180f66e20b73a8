"""The general solution of a linear fin: any profile, a uniform coefficient, any tip but an infinite one.

What depends on the geometry alone is computed once and kept: elements (`elements`), modes (`modes`), and the
modes' values at the positions asked for. Every set of parameters after that is a short sum. With ratio = h/k,
D_j = 1/(1/ratio + s_j²) and the base one kelvin above the air, a tip that is adiabatic, or loses heat as the
side does, gives

    1 - theta(x) = sum_j D_j d_j z_j(x),          d_j = z_j M 1,
    fall = ratio rest + sum_j D_j (d_j/s_j)²,     the base's heat over k.

The fall is the reaction K theta + ratio M theta at the base: what the side loses, not a derivative. A tip
with a coefficient of its own is a change of rank one, and a held one its limit: with a = theta(L) and the
response g(x) = sum_j D_j z_j(L) z_j(x)/ratio to one unit of fall at the tip,

    theta(x) + (theta_tip - a) g(x)/g(L),         theta_tip = a/(1 + H g(L)),  H = h_tip A_tip/k.
"""

from dataclasses import dataclass
from functools import lru_cache
from math import ceil, log2

import numpy as np
from numpy.typing import NDArray

from finback.models.coupling import (
    Driving,
    HeldFalls,
    driving,
    require_tip,
    rows,
    settle_held,
    tip_strength,
    within,
)
from finback.models.elements import DEGREE, Elements, discretise
from finback.models.ends import AdiabaticTip, Base, ConvectiveTip, FixedTip
from finback.models.fin import Fin
from finback.models.modes import Modes, find
from finback.models.profiles import Profile
from finback.models.solution import Solution
from finback.models.surface import UniformCoefficient

Array = NDArray[np.float64]
Values = float | Array

ACCURACY = 1e-9
"""Accuracy of a temperature ratio and of a heat [1] unless another one is asked for."""
LARGEST_ML = 1e5
"""Largest m L [1] that the elements resolve; beyond it a fin is continued as one that ends nowhere."""
SMALLEST_RATIO = 1e-250
"""Smallest h/k [1/m] that is evaluated, so that h = 0 needs no form of its own."""
LEVELS = (-15, 60)
"""Modes are found for h/k up to powers of 4 with these exponents [1]: 1e-9 to 1e36 1/m."""
DRIVEN = "driven"
"""The kind of a tip that is held or has a coefficient of its own; others bear the name of their class."""
BLOCK = 2048
"""Sets summed at a time [1]: their terms stay in the processor's cache."""


def applies(fin: Fin) -> bool:
    """Tell whether this module can solve the fin: a uniform coefficient on any profile."""
    return fin.is_linear


def solve(fin: Fin, base: Base, air: Values, x: Array, accuracy: float = ACCURACY) -> Solution:
    """Solve a block of fins of any one shape.

    Arguments: fin; base, its temperature or a joint; air temperature [K]; x, positions [m] of shape (n_x,),
    0 at the base; accuracy [1] of heats, and of temperatures over that of the base.
    Returns a `Solution` of n_sets rows. The first call for a shape takes milliseconds, further ones
    microseconds and some tens of nanoseconds a set. Raises TypeError for a surface law that is not uniform,
    ValueError for a tip that the shape cannot have, a position outside the fin or an area that is not
    positive.
    """
    surface, tip = fin.surface, fin.tip
    if not isinstance(surface, UniformCoefficient):
        raise TypeError(f"no general solution with {type(surface).__name__}")
    ratio = np.asarray(surface.coefficient / fin.constant_conductivity, dtype=np.float64).reshape(-1)
    own = isinstance(tip, ConvectiveTip) and tip.coefficient is not None
    kind = DRIVEN if own or isinstance(tip, FixedTip) else type(tip).__name__
    top = float(np.fmax.reduce(ratio))
    terms = _terms(fin.profile, kind, _level(top), accuracy, np.asarray(x, dtype=np.float64).tobytes())
    require_tip(fin.profile, tip)
    held = ratio
    if not (top <= terms.largest and float(ratio.min()) >= SMALLEST_RATIO):
        held = np.minimum(np.maximum(ratio, SMALLEST_RATIO), terms.largest)
    sums = terms.sums(held)
    fall = sums[-1]  # in its place: fresh memory takes longer than the numbers, here and below
    fall += held * terms.rest
    if top > terms.largest:
        fall += terms.beyond(ratio, terms.base_area, terms.base_perimeter)
    drive = driving(base, air, fin.constant_conductivity, terms.base_area)
    if isinstance(tip, FixedTip):
        return _held(fin, tip.temperature - air, air, terms, drive, Sums(ratio, held, fall, sums))
    return _free(fin, air, terms, drive, Sums(ratio, held, fall, sums))


def _level(top: float) -> int:
    """Return the exponent of the power of 4 that the largest ratio does not exceed."""
    if not top > 0:
        return LEVELS[0]
    return LEVELS[1] if top == np.inf else min(max(ceil(log2(top) / 2), LEVELS[0]), LEVELS[1])


@dataclass(frozen=True, slots=True)
class Sums:
    """The sums of a block of sets.

    ratio and held: h/k [1/m] as given, and within what the modes hold for; fall [m] at the base for one
    kelvin, the tip adiabatic or losing heat as the side does; each (n_sets,). sums: (n_sums, n_sets), those
    of `Terms`.
    """

    ratio: Array
    held: Array
    fall: Array
    sums: Array


@dataclass(frozen=True, slots=True)
class Terms:
    """What a sum over modes needs for one shape and its positions.

    square: s_j² (n_modes, 1) [m]; weights (n_sums, n_modes) of each mode in each sum; rest [m²]; largest h/k
    [1/m] for which the modes hold; areas of base and tip [m²] and perimeters there [m]; n_x, number of
    positions; at_tip, which of them lie at the very tip; cold_tip, whether the fin has the air's temperature
    there; driven, whether the tip may be held or have a coefficient of its own. Sums: d z(x), then, if
    driven, z(L) z(x), then d z(L), if driven z(L)², and (d/s)².
    """

    square: Array
    weights: Array
    rest: float
    largest: float
    base_area: float
    base_perimeter: float
    tip_area: float
    tip_perimeter: float
    n_x: int
    at_tip: NDArray[np.bool_]
    cold_tip: bool
    driven: bool

    def sums(self, ratio: Array) -> Array:
        """Return sum_j D_j weights_j for h/k [1/m] of shape (n_sets,) -> (n_sums, n_sets)."""
        found = np.empty((len(self.weights), len(ratio)))
        for start in range(0, len(ratio), BLOCK):
            share = 1 / ratio[start : start + BLOCK] + self.square
            np.reciprocal(share, out=share)
            np.matmul(self.weights, share, out=found[:, start : start + BLOCK])
        return found

    def beyond(self, ratio: Array, area: float, perimeter: float) -> Array:
        """Return what an end's fall [m] grows by beyond the largest ratio: A m, as that of an endless fin."""
        m, m_largest = (np.sqrt(value * (perimeter / area)) for value in (ratio, self.largest))
        return np.asarray(np.maximum(area * (m - m_largest), 0.0))

    def tip(self, found: Sums) -> tuple[Array, Array]:
        """Return a = theta(L) [1], and the fall 1/g(L) [m] that changes the tip's excess by one kelvin."""
        tip_fall = found.held / found.sums[-2]
        return 1 - found.sums[-3], tip_fall + self.beyond(found.ratio, self.tip_area, self.tip_perimeter)

    def reach(self, found: Sums) -> Array:
        """Return g(x)/g(L) [1], how far a change at the tip reaches: (n_x, n_sets)."""
        share: Array = found.sums[self.n_x : 2 * self.n_x] / found.sums[-2]
        return share


@lru_cache(maxsize=512)
def _terms(profile: object, kind: str, level: int, accuracy: float, positions: bytes) -> Terms:
    if not isinstance(profile, Profile):
        name = type(profile).__name__
        raise TypeError(f"{name} is no profile: it needs length, area, perimeter, side_area and a hash")
    x = within(profile, np.frombuffer(positions))
    ends = np.array([0.0, profile.length])
    (base_area, tip_area), (base_perimeter, tip_perimeter) = profile.area(ends), profile.perimeter(ends)
    sharp = tip_area <= 0
    if sharp:
        kind = AdiabaticTip.__name__
    elements, modes, largest = _modes(profile, kind, level, accuracy)
    z, tip = elements.at(x, modes.vectors), modes.vectors[-1]
    heat = modes.load**2 / modes.square
    driven = kind == DRIVEN
    if driven:
        parts = [z * modes.load, z * tip, [tip * modes.load, tip * tip, heat]]
    else:
        parts = [z * modes.load, [tip * modes.load, heat]]
    return Terms(
        modes.square[:, None],
        weights=np.ascontiguousarray(np.concatenate(parts)),
        rest=modes.rest,
        largest=largest,
        base_area=float(base_area),
        base_perimeter=float(base_perimeter),
        tip_area=float(tip_area),
        tip_perimeter=float(tip_perimeter),
        n_x=len(x),
        at_tip=x >= profile.length,
        cold_tip=elements.cold,
        driven=driven,
    )


@lru_cache(maxsize=64)
def _modes(profile: Profile, kind: str, level: int, accuracy: float) -> tuple[Elements, Modes, float]:
    """Return elements, modes, and the largest h/k [1/m] they hold for: a power of 4, or what m L allows."""
    length, ends = profile.length, np.array([0.0, profile.length])
    area, perimeter = profile.area(ends), np.maximum(profile.perimeter(ends), SMALLEST_RATIO)
    largest = min(4.0**level, (LARGEST_ML / length) ** 2 * float(area[0] / perimeter[0]))
    layers = np.minimum(2 * np.sqrt(area / (perimeter * largest)), length)
    driven = kind == DRIVEN
    elements = discretise(
        profile,
        base_layer=float(layers[0]),
        tip_layer=float(layers[1]) if driven else None,
        tip_loss=float(area[1]) if kind == ConvectiveTip.__name__ else 0.0,
        degree=DEGREE,
    )
    return elements, find(elements, largest, accuracy, driven), largest


def _free(fin: Fin, air: Values, terms: Terms, drive: Driving, found: Sums) -> Solution:
    """Solve fins whose tip is adiabatic, sharp or convective."""
    k, fall, drop = fin.constant_conductivity, found.fall, found.sums[: terms.n_x]
    strength = tip_strength(fin.tip, found.ratio * k, k, terms.tip_area)
    if terms.driven:
        at_tip, tip_fall = terms.tip(found)
        weakened = at_tip * tip_fall / (tip_fall + strength)
        fall = fall + at_tip * strength * weakened
        drop = drop + (at_tip - weakened) * terms.reach(found)
    else:
        weakened = np.subtract(1, found.sums[-2], out=found.sums[-2])
    base_excess = np.asarray(drive.excess / (1 + drive.bond * fall)).reshape(-1)
    room = drop if drop.shape[1] == base_excess.size else None
    temperatures = np.multiply(drop, -base_excess, out=room)
    temperatures += base_excess + air
    if terms.cold_tip:
        weakened = (found.ratio <= 0).astype(np.float64)  # without loss there is no fall
        temperatures[terms.at_tip] = base_excess * weakened + air
    base_heat = k * fall * base_excess
    tip_excess = base_excess * weakened
    return Solution(
        temperatures=temperatures.T,
        base_temperature=rows(base_excess + air, base_heat),
        base_heat=base_heat,
        tip_temperature=rows(tip_excess + air, base_heat),
        tip_heat=rows(k * strength * tip_excess, base_heat),
    )


def _held(fin: Fin, tip_excess: Values, air: Values, terms: Terms, drive: Driving, found: Sums) -> Solution:
    """Solve fins whose tip is held at an excess temperature [K]."""
    at_tip, tip_fall = terms.tip(found)
    drop = found.sums[-3]  # 1 - at_tip, with its digits
    held = HeldFalls(at_tip * tip_fall, found.fall - at_tip * tip_fall * drop, tip_fall * drop)
    settled = settle_held(drive, held, tip_excess)
    base_excess = np.asarray(settled.base_excess).reshape(-1)
    temperatures = found.sums[: terms.n_x] * -base_excess
    temperatures = temperatures + (tip_excess - at_tip * base_excess) * terms.reach(found)
    temperatures += base_excess + air
    base_heat = np.asarray(fin.constant_conductivity * settled.base_fall)
    return Solution(
        temperatures=temperatures.T,
        base_temperature=rows(base_excess + air, base_heat),
        base_heat=base_heat,
        tip_temperature=rows(tip_excess + air, base_heat),
        tip_heat=rows(fin.constant_conductivity * settled.tip_fall, base_heat),
    )
