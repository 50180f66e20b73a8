"""Heavy tails: readings of which now and then one lies far off, as with a loose junction or a broken shield.

The error of a reading that is its own, its random noise and its hole's position in quadrature, follows
Student's t with nu = 4 degrees of freedom in place of the normal distribution. Its scale s is the standard
uncertainty that is stated: in the middle the two are nearly alike, and half of the errors lie within 0.74 s,
for 0.67 s; beyond 3 s lie 4.0 %, for 0.3 %, beyond 10 s one in 1,800, for none. With

    w(e) = sign(e) sqrt((nu + 1) ln(1 + e²/nu)),   e = r/s,

half the sum of w² is the negative log likelihood up to constants, as for normal noise half that of e².
Source: Lange, Little, Taylor, J. Am. Stat. Assoc. 84 (1989) 881, who find 4 degrees of freedom good where
they cannot be estimated.
"""

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from finback import noise as noises
from finback.noise import Noise

Array = NDArray[np.float64]

FREEDOM = 4.0
LOG_HEIGHT = math.lgamma((FREEDOM + 1) / 2) - math.lgamma(FREEDOM / 2) - 0.5 * math.log(FREEDOM / 2)
"""Logarithm of the density's height in its middle, over that of a normal one of the same scale."""
INFORMATION = (FREEDOM + 1) / (FREEDOM + 3)
"""Information of a reading on what it reads, on average, over that of a normal one of the same scale."""


def build(fixed: Array, estimated: NDArray[np.bool_], heavy: int) -> Noise:
    """Return the noise of readings of which the first few have heavy tails and share no error.

    Arguments: fixed (n, n), estimated (n,), as for `noise.build`; heavy, the number of those readings, of
    whose part of `fixed` the diagonal counts.
    """
    single = [slice(i, i + 1) for i in range(heavy)]
    rest = [slice(heavy, None)] if len(fixed) > heavy else []
    parts = [noises.build(fixed[own, own], estimated[own]) for own in single + rest]
    return replace(noises.side_by_side(parts), heavy=heavy)


def bend(scaled: Array, heavy: int) -> Array:
    """Return w of the first `heavy` columns of residuals over scales (n_sets, n), the others as given."""
    first = scaled[:, :heavy]
    bent = np.copysign(np.sqrt((FREEDOM + 1) * np.log1p(np.square(first) / FREEDOM)), first)
    return np.concatenate([bent, scaled[:, heavy:]], axis=1)


def squares(whitened: Array, heavy: int) -> Array:
    """Return the squares (n,) of residuals over their scales, the first `heavy` of which are given as w."""
    residuals = np.concatenate([unbend(whitened[:heavy]), whitened[heavy:]])
    return np.asarray(np.square(residuals))


def counted(squares: Array, heavy: int) -> Array:
    """Return the squares (n,) of residuals over their scales as they count in an estimate of the scale.

    Those of the first `heavy` are e² times the weight (nu + 1)/(nu + e²), one on average as for normal noise
    and never above nu + 1: at the most probable scale they add up to their number.
    """
    own = squares[:heavy]
    return np.concatenate([(FREEDOM + 1) * own / (FREEDOM + own), squares[heavy:]])


def unbend(bent: Array) -> Array:
    """Return the residuals e over their scales (n,) whose w(e) is `bent` (n,)."""
    return np.copysign(np.sqrt(FREEDOM * np.expm1(np.square(bent) / (FREEDOM + 1))), bent)


def widening(bent: Array) -> Array:
    """Return what a reading's scale is to be multiplied by where it is to count as a normal one.

    Argument: bent (n,), its w(e). A reading has the weight (nu + 1)/(nu + e²) in an iterated fit, one on
    average; times INFORMATION it is what it tells, on average, and one far off hardly counts.
    """
    weights = (FREEDOM + 1) / (FREEDOM + np.square(unbend(bent)))
    return np.asarray(1 / np.sqrt(INFORMATION * weights))


def steepness(bent: Array) -> Array:
    """Return dw/de (n,) where w(e) is `bent` (n,)."""
    residuals = unbend(bent)
    weights = (FREEDOM + 1) / (FREEDOM + np.square(residuals))
    middle = bent == 0
    ratio = np.where(middle, 1.0, residuals) / np.where(middle, 1.0, bent)
    return np.asarray(weights * np.where(middle, math.sqrt(FREEDOM / (FREEDOM + 1)), ratio))
