"""Least-squares values of all quantities with their standard errors, by linear propagation.

Source: JCGM 100:2008, clause 5. Uncertain lengths, which the noise of the readings holds, move a quantity by
what the residuals say of them, and add their own variance and their covariance with the parameters. A reading
with heavy tails counts as the normal one that tells as much (`tails`).
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from finback import derived, geometry, least_squares, tails
from finback.optimum import LeastSquares

Array = NDArray[np.float64]

OUT_OF_REACH = 1e-6
"""Share of a gradient [1] that may lie where the readings say nothing."""


@dataclass(frozen=True)
class LinearAnswers:
    """What a least-squares optimum says of each quantity."""

    point: LeastSquares

    def answer(self, name: str) -> tuple[float | None, float | None]:
        """Return value and standard error of a quantity, SI units; None, None where it is not determined."""
        point, value = self.point, float(self._values[name][0])
        if name in point.problem.fixed:
            return value, 0.0
        gradient = self._gradients[name]
        outside = np.abs(gradient @ point.point.null_space).max(initial=0.0)
        if outside > OUT_OF_REACH * np.linalg.norm(gradient):
            return None, None
        moved, added = self._of_lengths(name, gradient)
        variance = float(gradient @ self._covariance @ gradient) + added
        return value + moved, float(np.sqrt(max(variance, 0.0)))

    @cached_property
    def _values(self) -> Mapping[str, Array]:
        return derived.evaluate(self.point.problem, self.point.z[None])

    @cached_property
    def _gradients(self) -> Mapping[str, Array]:
        return geometry.gradients(self.point.problem, self.point.z)

    @cached_property
    def _covariance(self) -> Array:
        """The covariance of the parameters."""
        point, heavy = self.point.point, self.point.noise.heavy
        if not heavy:
            return point.covariance
        bent, slopes = point.residuals[:heavy], point.jacobian.copy()
        slopes[:heavy] /= (tails.steepness(bent) * tails.widening(bent))[:, None]
        return least_squares.invert_information(slopes)[0]

    @cached_property
    def _slopes(self) -> Mapping[str, Array]:
        if self.point.problem.by_lengths is None and not self.point.problem.candidate.heavy_tails:
            return {}
        return geometry.slopes(self.point.problem, self.point.z)

    def _of_lengths(self, name: str, gradient: Array) -> tuple[float, float]:
        """Return by how much uncertain lengths move a quantity, and what they add to its variance."""
        problem, point = self.point.problem, self.point.point
        slope, own = self._slopes.get(name), geometry.moved(problem, self.point.z[None])
        if slope is not None and own is not None:
            return float(own[0] @ slope), 0.0  # their variance is among that of the parameters
        if slope is None or problem.by_lengths is None:
            return 0.0, 0.0
        n = len(problem.by_lengths)
        scale = np.sqrt(np.broadcast_to(self.point.noise.variances(self.point.sigma), n))
        seen = (self.point.noise.basis.T @ problem.by_lengths) / scale[:, None]
        shared = point.covariance @ point.jacobian[:n].T @ seen
        of_lengths = np.eye(len(slope)) - seen.T @ seen + seen.T @ point.jacobian[:n] @ shared
        added = 2 * gradient @ shared @ slope + slope @ of_lengths @ slope
        return float(slope @ (seen.T @ point.residuals[:n])), float(added)
