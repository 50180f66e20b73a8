"""What the readings determine, what is taken from a statement, and what nothing determines.

All in the coordinates of a problem and linear at one point. The wide default priors set the yardstick: with
S the covariance from all sources and W the precision of the wide priors, the share g'S W S g / g'S g of what
is known of a combination g comes from the wide priors, that is from nowhere. No tolerance on a rank is
needed, and weakly determined is a number, not a switch. What little a combination depends on may come from
nowhere all the same where it hardly depends on it: one that is known to a small part of what the wide priors
would leave open, g' W^-1 g, is determined too.
"""

from dataclasses import dataclass
from functools import cached_property
from itertools import product

import numpy as np
from numpy.typing import NDArray

from finback import least_squares
from finback.estimate import DeterminedBy
from finback.problem import Problem

Array = NDArray[np.float64]

DETERMINED = (
    0.2  # of the default prior's variance: below it the prior adds at most a fifth of the information
)
CLEAR_OF_ZERO = 3.0  # standard deviations, from which a positive quantity is more than a limit
NARROWED = 0.05  # of the standard deviation by the wide priors alone, to which a combination is known
ALONE = 1.25  # a source decides alone when leaving out the other costs at most this factor in variance


@dataclass(frozen=True)
class Information:
    """Information on the physical parameters at one point.

    Errors that are unknowns of their own, the last of them, are averaged over: p does not count them, and
    what a gradient has for them does not matter. `readings` (p, p): J'J of the whitened readings; `stated`
    (p,): precisions of stated priors; `default` (p,): precisions of the wide priors, for every parameter.
    """

    readings: Array
    stated: Array
    default: Array

    def variance(self, gradient: Array, readings: bool = True, stated: bool = True) -> float:
        """Return the variance of the combination gradient (p,) by the chosen sources and wide priors."""
        gradient = gradient[: len(self.default)]
        return float(gradient @ self._response(gradient, readings, stated))

    def determines(self, gradient: Array) -> bool:
        """Tell whether readings and stated values determine the combination."""
        gradient = gradient[: len(self.default)]
        response = self._response(gradient, readings=True, stated=True)
        variance, open_to = float(gradient @ response), float(np.square(gradient) @ (1 / self.default))
        from_nowhere = float(np.square(response) @ self.default)
        return from_nowhere <= DETERMINED * variance or variance <= NARROWED**2 * open_to

    def clears_zero(self, gradient: Array, value: float) -> bool:
        """Tell whether a positive quantity of this gradient (p,) and value lies clear of zero."""
        return CLEAR_OF_ZERO**2 * self.variance(gradient) <= value**2

    def _response(self, gradient: Array, readings: bool, stated: bool) -> Array:
        found: Array = self._covariances[readings, stated] @ gradient
        return found

    @cached_property
    def _covariances(self) -> dict[tuple[bool, bool], Array]:
        """Covariances (p, p) by whether the readings and whether stated values count."""
        found = {}
        for readings, stated in product((True, False), repeat=2):
            precision = np.diag(self.default + stated * self.stated) + readings * self.readings
            scale = 1 / np.sqrt(np.diag(precision))
            found[readings, stated] = np.linalg.inv(precision * np.outer(scale, scale)) * np.outer(
                scale, scale
            )
        return found

    def source(self, gradient: Array) -> DeterminedBy:
        """Tell what determines the combination."""
        both = self.variance(gradient)
        if self.variance(gradient, stated=False) <= ALONE * both and self.determines(gradient):
            return "readings"
        if self.variance(gradient, readings=False) <= ALONE * both:
            return "prior"
        return "both"


def information(problem: Problem, z: Array, sigma: float, bounds: bool = True) -> Information:
    """Return the information at a parameter vector z (p,) with the noise at sigma [K].

    `bounds`: whether heaters count that only bound the heat. They exclude what lies beyond, and determine
    nothing, however sharply they cut a posterior off.
    """
    n = problem.n_physical
    rest = z[n:]
    counted = len(problem.measured.values) + (len(problem.measured.bounds) if bounds else 0)

    def residuals(block: Array) -> Array:
        whole = np.concatenate([block, np.tile(rest, (len(block), 1))], axis=1)
        return problem.whitened(whole, sigma)[0][:, :counted]

    slopes = least_squares.jacobian(residuals, z[:n])
    own = problem.are_shared.start
    physical = problem.parameters[:own]
    return Information(
        readings=_without(slopes.T @ slopes, own),
        stated=np.array([p.prior.sd**-2 if p.stated else 0.0 for p in physical]),
        default=np.array([p.default_prior.sd**-2 for p in physical]),
    )


def _without(information: Array, own: int) -> Array:
    """Return the information (own, own) on the first parameters, the others being standard normal errors."""
    if own == len(information):
        return information
    known = information[own:, own:] + np.eye(len(information) - own)
    across = information[:own, own:]
    return np.asarray(information[:own, :own] - across @ np.linalg.solve(known, across.T))
