"""Solve a fin, choosing the solver that suits it."""

import numpy as np
from numpy.typing import NDArray

from finback.models import closed_form
from finback.models.ends import Base
from finback.models.fin import Fin
from finback.models.solution import Solution

Array = NDArray[np.float64]


def solve(fin: Fin, base: Base, air: float | Array, x: Array) -> Solution:
    """Solve a fin, or a block of fins of one shape.

    Arguments: fin; base, the base's temperature or the joint and plate it hangs on; air temperature [K], a
    float or of shape (n_sets,); x, positions along the fin [m] of shape (n_x,), from 0 at the base to its
    length. Every value of fin, base and air may be a float or of shape (n_sets,).

    Returns a `Solution` of n_sets rows. Raises TypeError for a fin that no solver here can take.
    """
    if closed_form.applies(fin):
        return closed_form.solve(fin, base, air, x)
    raise TypeError(f"no solver for {type(fin.profile).__name__} with {type(fin.surface).__name__}")
