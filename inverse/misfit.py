"""Smooth misfit: a model that is wrong by a little everywhere, and by nearly the same at neighbouring places.

A coefficient that varies along the fin, leads that carry heat off, air that is not the same everywhere: none
of them is a candidate of its own on every rig, and all of them bend the profile smoothly. They are taken
together as a Gaussian process along the fin, a share a of the local excess temperature,

    T(x) = model + a theta(x) g(x),   Cov(g(x), g(x')) = exp(-(x - x')^2 / (2 l^2)),   l = 0.3 L.

A share of the excess, since each of these errors is one: a fin as warm as its air shows none of them. With
0.3 L there are two or three bends on a fin: much shorter is what scatters from sensor to sensor, and noise;
much longer is what another h, base or air temperature gives, and is not seen apart from those.
Source of the process: Kennedy, O'Hagan, J. R. Stat. Soc. B 63 (2001) 425, for a model's discrepancy.
"""

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

CORRELATION_LENGTH = 0.3
"""Distance over which misfit stays alike, as a share of the fin's length [1]."""
FEWEST_SENSORS = 5
"""Readings along the fin below which a smooth misfit could explain anything, and none is looked for."""


def covariance(x: Array, excess: Array, length: float, readings: int) -> Array:
    """Return the covariance (n, n) [K²] of all readings by a misfit of share 1.

    Arguments: x (n_fin,), positions along the fin [m]; excess (n_fin,), temperature above the air [K];
    length of the fin [m]; readings, their number n, those along the fin first: the others see no misfit.
    """
    apart = (x[:, None] - x[None, :]) / (CORRELATION_LENGTH * length)
    found = np.zeros((readings, readings))
    found[: len(x), : len(x)] = np.outer(excess, excess) * np.exp(-0.5 * np.square(apart))
    return found
