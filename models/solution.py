"""What solving a fin gives, whichever solver did it."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Solution:
    """Temperatures and heat flows of a block of fins.

    Shapes: temperatures (n_sets, n_positions) [K] at the positions asked for; base_temperature [K], of the
    fin's side of a joint; base_heat [W], into the fin; tip_temperature [K], at x = length; tip_heat [W],
    out through the tip face, or through the section at x = length of a fin that goes on; the last four of
    shape (n_sets,).

    Of a fin that was solved step by step: converged (n_sets,), True where the steps ended and finer nodes
    would change little, while a row with False holds the last step; radiated_heat (n_sets,) [W], from the
    side, and from a tip face that follows the law of the side. Of all others True and 0.
    """

    temperatures: Array
    base_temperature: Array
    base_heat: Array
    tip_temperature: Array
    tip_heat: Array
    converged: NDArray[np.bool_] | bool = True
    radiated_heat: Array | float = 0.0
