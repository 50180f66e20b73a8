"""A fin: a profile, what conducts in it, what its surface loses and how it ends. It knows nothing of data."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.models.conductivity import Conductivity, constant
from finback.models.ends import Tip
from finback.models.profiles import Profile
from finback.models.surface import SurfaceLaw, UniformCoefficient

Values = float | NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Fin:
    """A fin, or a block of fins of one shape.

    Arguments: profile; conductivity k [W/(m K)], a float or of shape (n_sets,), or a law of it; surface, the
    law of the heat loss from its side; tip.
    """

    profile: Profile
    conductivity: Values | Conductivity
    surface: SurfaceLaw
    tip: Tip

    @property
    def is_linear(self) -> bool:
        """Whether k is the same at every temperature and one coefficient holds all along."""
        return isinstance(self.surface, UniformCoefficient) and constant(self.conductivity) is not None

    @property
    def constant_conductivity(self) -> Values:
        """Conductivity k [W/(m K)], the same at every temperature. Raises TypeError for one that is not."""
        k = constant(self.conductivity)
        if k is None:
            raise TypeError(f"no linear solution with {type(self.conductivity).__name__}")
        return k
