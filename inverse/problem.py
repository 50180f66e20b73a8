"""A problem: rig + readings + parameters + noise for one candidate. The seam where physics meets data.

Least squares, the sampler and the evidence all go through `Problem.whitened`, so they cannot disagree about
the noise. Everything takes a block of parameter vectors, (n_sets, n_parameters).
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from finback import tails
from finback.models import Base, Fin, PlateHeat, Solution, plate_heat, solve
from finback.noise import Noise
from finback.parameters import LARGEST_LOG, Parameter
from finback.readings import Readings
from finback.rig import LawName, Rig, Sensor, TipName

Array = NDArray[np.float64]
Values = Mapping[str, float | Array]

LOG_TWO_PI = math.log(2 * math.pi)
LAW_WORDS: Mapping[LawName, str] = {
    "uniform": "uniform h",
    "free-convection": "free convection",
    "varying": "h varying along the fin",
    "radiating": "uniform h and radiation",
}
SMOOTH_MISFIT = ", smooth misfit"
"""What the name of a candidate with a misfit ends on."""
HEAVY_TAILS = ", heavy-tailed noise"
"""What the name of a candidate with heavy tails ends on."""
ODDS_OF_MISFIT = 0.1
"""A candidate with a smooth misfit over the same one without, before the readings: a rig is taken to be as it
is described unless the readings speak against that, and a model without a misfit is right or nearly so more
often than not."""
ODDS_OF_HEAVY_TAILS = 0.1
"""A candidate with heavy tails over the same one with normal noise, before the readings: most sensors on most
rigs are in order."""
HEATS = ("heat", "heater")
PIECE = 1024  # sets of a linear fin at a time, that stay in the processor's cache
FINEST_NOISE = 1e-6  # K; finer than any reading, and what readings without errors are left with


@dataclass(frozen=True, slots=True)
class Candidate:
    """One hypothesis of the physics: the tip, whether there is a joint at the base, and the surface's law.

    `joint_possible`: whether the rig reads a plate, so that a joint could be seen at all; `law_named`:
    whether its name says the law, as it does where several are compared; `misfit`: whether the profile may
    differ smoothly from its physics; `heavy_tails`: whether the noise of the fin's sensors has heavy tails.
    There is no candidate with both.
    """

    tip: TipName
    joint: bool
    joint_possible: bool
    law: LawName = "uniform"
    law_named: bool = False
    misfit: bool = False
    heavy_tails: bool = False

    @property
    def name(self) -> str:
        """Name in results, such as "convective tip, joint, smooth misfit"."""
        return self.physics + SMOOTH_MISFIT * self.misfit + HEAVY_TAILS * self.heavy_tails

    @property
    def physics(self) -> str:
        """Name of its physics, whatever the misfit and the tails of the noise."""
        parts = [f"{self.tip} tip"]
        if self.joint_possible:
            parts.append("joint" if self.joint else "no joint")
        if self.law_named:
            parts.append(LAW_WORDS[self.law])
        return ", ".join(parts)

    @property
    def log_prior(self) -> float:
        """Log probability [nats] before the readings, up to a constant."""
        odds = (ODDS_OF_MISFIT if self.misfit else 1.0) * (ODDS_OF_HEAVY_TAILS if self.heavy_tails else 1.0)
        return math.log(odds)


@dataclass(frozen=True)
class Measured:
    """What the likelihood compares predictions with.

    `sensors`: those with Gaussian noise, fin sensors first, then plate, air, heat, and heaters of a plate
    whose losses are stated; `values` (n,) [K, W] in that order. `bounds`: other heaters, whose power only
    limits the heat; `bound_values`, `bound_sds` [W].
    """

    sensors: tuple[Sensor, ...]
    values: Array
    bounds: tuple[Sensor, ...]
    bound_values: Array
    bound_sds: Array

    @cached_property
    def positions(self) -> Array:
        """Positions of the fin sensors [m], shape (n_fin,)."""
        return np.array([s.position for s in self.sensors if s.place == "fin"], dtype=np.float64)


@dataclass(frozen=True)
class Problem:
    """One candidate posed on one run.

    `parameters`: the unknowns in the order of a parameter vector, the physical ones first, then errors that
    readings share and that are unknowns of their own, then the share of a smooth misfit and the noise, where
    they are estimated.
    `fixed`: what is exactly known, by name, in SI units. `by_lengths` (n, n_lengths) [K, W]: what one
    standard uncertainty of each uncertain length makes of each reading, once the noise holds it.
    `shared` (n, n_shared) [K, W]: the same of those errors that are unknowns of their own, in order.
    """

    rig: Rig
    readings: Readings
    candidate: Candidate
    parameters: tuple[Parameter, ...]
    fixed: Mapping[str, float]
    measured: Measured
    noise: Noise
    by_lengths: Array | None = None
    shared: Array | None = None

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters, in order."""
        return tuple(p.name for p in self.parameters)

    @cached_property
    def prior_mean(self) -> Array:
        """Means of the coordinates before the readings, shape (p,)."""
        return np.array([p.prior.mean for p in self.parameters])

    @cached_property
    def prior_sd(self) -> Array:
        """Standard deviations of the coordinates before the readings, shape (p,)."""
        return np.array([p.prior.sd for p in self.parameters])

    @cached_property
    def is_stated(self) -> NDArray[np.bool_]:
        """Which priors the rig states, shape (p,)."""
        return np.array([p.stated for p in self.parameters])

    @cached_property
    def is_linear(self) -> bool:
        """Whether the fin has one h all along, one conductivity, and does not radiate."""
        return self.candidate.law == "uniform" and self.rig.emissivity is None and self.rig.change is None

    @cached_property
    def n_physical(self) -> int:
        """Number of parameters that are neither misfit nor noise."""
        return len(self.parameters) - self.noise.estimated - self.candidate.misfit

    @cached_property
    def are_shared(self) -> slice:
        """Where in a parameter vector the errors are that readings share and that are unknowns."""
        count = 0 if self.shared is None else self.shared.shape[1]
        return slice(self.n_physical - count, self.n_physical)

    @cached_property
    def _logs(self) -> NDArray[np.bool_]:
        return np.array([p.transform == "log" for p in self.parameters])

    @cached_property
    def _bounded(self) -> tuple[tuple[int, Parameter], ...]:
        return tuple((i, p) for i, p in enumerate(self.parameters) if p.transform == "bounded")

    @cached_property
    def _is_white(self) -> bool:
        return bool((self.noise.floor == 1).all())

    @cached_property
    def _kinds(self) -> tuple[NDArray[np.intp], NDArray[np.intp], Array]:
        """Parts of the noise that are alike: where the first of a kind is, which kind each is, how many."""
        both = np.stack([self.noise.floor, self.noise.slope])
        _, first, which, counts = np.unique(
            both, axis=1, return_index=True, return_inverse=True, return_counts=True
        )
        return first, which.ravel(), counts.astype(np.float64)

    @cached_property
    def _constant(self) -> float:
        normal = -0.5 * (self.noise.log_det + len(self.measured.values) * LOG_TWO_PI)
        return normal + self.noise.heavy * tails.LOG_HEIGHT

    @cached_property
    def _prior_constant(self) -> float:
        return -float(np.log(self.prior_sd).sum() + 0.5 * LOG_TWO_PI * len(self.parameters))

    def values(self, z: Array) -> dict[str, float | Array]:
        """Return the values by name, SI units, of a block z (n_sets, p); each of shape (n_sets,) or exact."""
        found: dict[str, float | Array] = dict(self.fixed)
        natural = np.where(self._logs, np.exp(np.clip(z, -LARGEST_LOG, LARGEST_LOG)), z)
        found.update(zip(self.names, natural.T, strict=True))
        for column, parameter in self._bounded:
            found[parameter.name] = parameter.values(z[:, column])
        if self.noise.estimated:
            found["noise"] = np.hypot(natural[:, -1], FINEST_NOISE)
        return found

    def given(self, misfit: float) -> "Problem":
        """Return the problem with its misfit held at one share [1], which is then an unknown no more."""
        parameters = tuple(p for p in self.parameters if p.name != "misfit")
        candidate = replace(self.candidate, misfit=False)
        return replace(self, candidate=candidate, parameters=parameters, noise=self.noise.given(misfit))

    def build(
        self, values: Values, changes: Mapping[str, float] | None = None
    ) -> tuple[Fin, Base, float | Array]:
        """Return fin, base and air temperature for values by name; `changes` replaces lengths [m]."""
        return self.rig.build(values, self.candidate.tip, changes)

    def solve(self, values: Values, x: Array, changes: Mapping[str, float] | None = None) -> Solution:
        """Solve the fin for values by name at positions x [m]; `changes` replaces lengths [m].

        A sensor that a shorter fin would leave outside reads its tip.
        """
        fin, base, air = self.build(values, changes)
        if changes is not None:
            x = np.minimum(x, fin.profile.length)
        return solve(fin, base, air, x)

    def heats(self, values: Values, fin: Fin, solution: Solution) -> PlateHeat:
        """Return where the heat of the plate goes, for values by name and the fin's solution."""
        hot = values.get("plate", solution.base_temperature)
        return plate_heat(self.rig.plate_of(values, fin), solution.base_heat, hot, values["air"])

    def predict(self, z: Array, changes: Mapping[str, float] | None = None) -> Array:
        """Predict all readings: block z (n_sets, p) -> (n_sets, n + n_bounds) [K, W], heaters last."""
        return self.predict_values(self.values(z), len(z), changes)

    def predict_values(
        self, values: Values, n_sets: int, changes: Mapping[str, float] | None = None
    ) -> Array:
        """Predict all readings from values by name; see `predict`."""
        measured = self.measured
        n_fin = len(measured.positions)
        fin, base, air = self.build(values, changes)
        x = measured.positions if changes is None else np.minimum(measured.positions, fin.profile.length)
        solution = solve(fin, base, air, x)
        found = np.empty((len(measured.sensors) + len(measured.bounds), n_sets)).T  # many sets side by side
        found[:, :n_fin] = solution.temperatures
        others = measured.sensors[n_fin:] + measured.bounds
        into_fins = of_heater = solution.base_heat
        if self.rig.plate is not None and any(sensor.place in HEATS for sensor in others):
            heats = self.heats(values, fin, solution)
            into_fins, of_heater = heats.fins, heats.total
        predicted = {**values, "heat": into_fins, "heater": of_heater}
        for column, sensor in enumerate(others, start=n_fin):
            found[:, column] = predicted[sensor.place]
        return found

    def whitened(self, z: Array, sigma: float | None = None) -> tuple[Array, Array | float]:
        """Return whitened residuals (n_sets, n + n_bounds) and the sum of log variances (n_sets,).

        Each Gaussian residual has unit variance under the noise; one for a heater is sqrt(-2 ln Phi(y)), with
        y the margin of its power over the predicted heat in standard deviations, so that half the sum of
        squares is the negative log likelihood up to constants; `tails` does the same for one with heavy
        tails. `sigma` [K] overrides the noise parameter.
        """
        values = self.values(z)
        predicted = self.predict_values(values, len(z))
        n = len(self.measured.values)
        whitened, log_variances = self._whiten(self._residuals(z, predicted[:, :n]), values, sigma)
        if self.measured.bounds:
            whitened = np.concatenate([whitened, self.bound_residuals(predicted[:, n:])], axis=1)
        return whitened, log_variances

    def bound_residuals(self, predicted: Array) -> Array:
        """Return the whitened residuals of heaters that only limit the heat, for predictions [W] (..., b)."""
        from scipy.special import log_ndtr

        margin = (self.measured.bound_values - predicted) / self.measured.bound_sds
        return np.asarray(np.sqrt(-2 * log_ndtr(margin)))

    def _residuals(self, z: Array, predicted: Array) -> Array:
        """Return what readings are off the predicted ones (n_sets, n), less the errors that they share."""
        residuals = self.measured.values - predicted
        return residuals if self.shared is None else residuals - z[:, self.are_shared] @ self.shared.T

    def _whiten(self, residuals: Array, values: Values, sigma: float | None) -> tuple[Array, Array | float]:
        """Return whitened residuals of the readings with Gaussian noise, and the sum of log variances."""
        if self.noise.smooth is not None:
            noise = values.get("noise", 0.0) if sigma is None else sigma
            return self.noise.whiten(residuals, noise, values["misfit"])
        parts = residuals @ self.noise.basis
        log_variances: Array | float = 0.0
        if self.noise.estimated:
            first, which, counts = self._kinds
            noise = values["noise"] if sigma is None else sigma
            variances = self.noise.variances(np.reshape(noise, (-1, 1)), first)
            parts *= (1 / np.sqrt(variances))[:, which]
            log_variances = np.log(variances) @ counts
        elif not self._is_white:
            parts /= np.sqrt(self.noise.floor)
        whitened = tails.bend(parts, self.noise.heavy) if self.noise.heavy else parts
        return whitened, log_variances

    def log_likelihood(self, z: Array) -> Array:
        """Return ln p(readings | z) of a block (n_sets, p) -> (n_sets,)."""
        whitened, log_variances = self.whitened(z)
        squares: Array = np.einsum("ij,ij->i", whitened, whitened)
        return self._constant - 0.5 * (squares + log_variances)

    def log_prior(self, z: Array) -> Array:
        """Return ln p(z) of a block (n_sets, p) -> (n_sets,)."""
        scaled = (z - self.prior_mean) / self.prior_sd
        squares: Array = np.einsum("ij,ij->i", scaled, scaled)
        return self._prior_constant - 0.5 * squares

    def log_density(self, z: Array) -> Array:
        """Return ln p(readings, z) of a block (n_sets, p) -> (n_sets,); -inf where it is not a number."""
        if self.is_linear and len(z) > PIECE:
            return np.concatenate([self.log_density(z[i : i + PIECE]) for i in range(0, len(z), PIECE)])
        found = self.log_likelihood(z) + self.log_prior(z)
        return np.where(np.isfinite(found), found, -np.inf)

    def pointwise(self, z: Array) -> Array:
        """Return ln p(reading i | the other readings, z), (n_sets, n), as leave-one-out needs it.

        With C the covariance, P its inverse and e = P r: mean y_i - e_i/P_ii, variance 1/P_ii.
        Source: Bürkner, Gabry, Vehtari, Computational Statistics 36 (2021) 1243, eq. for Gaussian models. One
        with heavy tails shares nothing with others that z does not hold.
        """
        values = self.values(z)
        n = len(self.measured.values)
        residuals = self._residuals(z, self.predict_values(values, len(z))[:, :n])
        if self.noise.smooth is not None:
            inverse = self.noise.precision(values.get("noise", 0.0), values["misfit"])
            pull, precision = np.einsum("sij,sj->si", inverse, residuals), np.einsum("sii->si", inverse)
            return np.asarray(0.5 * (np.log(precision) - LOG_TWO_PI - np.square(pull) / precision))
        if self.noise.estimated:
            weights = 1 / self.noise.variances(np.asarray(values["noise"])[:, None])
        else:
            weights = 1 / np.broadcast_to(self.noise.floor, (len(z), n))
        basis = self.noise.basis
        pull = ((residuals @ basis) * weights) @ basis.T
        precision = weights @ np.square(basis).T
        scores, heavy = pull / np.sqrt(precision), self.noise.heavy
        if heavy:
            scores = tails.bend(scores, heavy)
        found = 0.5 * (np.log(precision) - LOG_TWO_PI - np.square(scores))
        found[:, :heavy] += tails.LOG_HEIGHT
        return np.asarray(found)
