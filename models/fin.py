"""A fin: a profile, what conducts in it, what its surface loses and how it ends. It knows nothing of data."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.ends import Tip
from finback.models.profiles import Profile
from finback.models.surface import SurfaceLaw

Values = float | NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Fin:
    """A fin, or a block of fins of one shape.

    Arguments: profile; conductivity k [W/(m K)], a float or of shape (n_sets,); surface, the law of the heat
    loss from its side; tip.
    """

    profile: Profile
    conductivity: Values
    surface: SurfaceLaw
    tip: Tip
