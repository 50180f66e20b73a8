"""Posing a problem: which parameters a candidate has on a run, and what the noise of its readings is."""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback import expectation, misfit, tails
from finback import noise as noises
from finback.parameters import UNMEASURED_AIR, Parameter, default, shared, stated
from finback.problem import Candidate, Measured, Problem
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig, Sensor

Array = NDArray[np.float64]

SMALLEST_NOISE = 1e-6  # K or W; keeps two sensors that share all their error from being told apart exactly
SMALLEST_REFERENCE = 1.0  # K
LENGTH_STEP = 1e-4  # relative step of a length in the sensitivities

ErrorKind = Literal["noise", "calibration", "position", "misfit"]


def pose(rig: Rig, readings: Readings, candidate: Candidate) -> Problem:
    """Return the problem of one candidate on one run.

    Hole positions and geometry enter the noise through the slopes at the optimum; `linearise` adds them.
    """
    measured, exact = _measure(rig, readings)
    parameters, fixed = _unknowns(rig, candidate, measured, exact)
    if candidate.law == "free-convection":
        fixed["reference_excess"] = reference_excess(rig, readings)
    covariance, estimated = _stated_covariance(measured, candidate.heavy_tails)
    errors = _shared_errors(rig, measured) if candidate.heavy_tails else {}
    parameters += [shared(name) for name in errors]
    if candidate.misfit:
        parameters.append(default("misfit"))
    if estimated.any():
        parameters.append(default("noise"))
    if candidate.heavy_tails:
        noise = tails.build(covariance, estimated, len(measured.positions))
    else:
        noise = noises.build(covariance, estimated, _smooth_as_read(rig, readings, candidate, measured))
    return Problem(
        rig=rig,
        readings=readings,
        candidate=candidate,
        parameters=tuple(parameters),
        fixed=fixed,
        measured=measured,
        noise=noise,
        shared=np.stack([*errors.values()], axis=1) if errors else None,
    )


def reference_excess(rig: Rig, readings: Readings) -> float:
    """Return the excess temperature [K] at which a coefficient that follows it is reported.

    It is the fin's mean one by the readings, so that the coefficient is close to the mean along the fin.
    """
    warm = _warmth(rig, readings)
    return max(abs(warm.surface - warm.air), SMALLEST_REFERENCE)


def _warmth(rig: Rig, readings: Readings) -> expectation.Warmth:
    stated = rig.surroundings.air
    warm = expectation.warmth(rig, readings, UNMEASURED_AIR.mean if stated is None else stated.value)
    assert warm is not None, "an air temperature is given"
    return warm


def _smooth_as_read(rig: Rig, readings: Readings, candidate: Candidate, measured: Measured) -> Array | None:
    """Return what a misfit of share 1 adds to the covariance, with excess temperatures as they were read."""
    if not candidate.misfit:
        return None
    n_fin = len(measured.positions)
    excess = measured.values[:n_fin] - _warmth(rig, readings).air
    return misfit.covariance(measured.positions, excess, rig.profile().length, len(measured.values))


def is_read(sensor: Sensor, readings: Readings) -> bool:
    """Tell whether a sensor has a reading that counts in this run."""
    return sensor.name in readings.values and sensor.name not in readings.excluded


def needs_linearising(problem: Problem) -> bool:
    """Tell whether positions, geometry or the model are uncertain, so that noise depends on the optimum."""
    positions = any(s.position_sd > 0 for s in problem.measured.sensors)
    return positions or problem.candidate.misfit or any(q.sd > 0 for q in problem.rig.geometry.values())


def linearise(problem: Problem, z: Array) -> Problem:
    """Return the problem with the noise of hole positions and geometry added, taken at z (p,)."""
    measured, heavy_tails = problem.measured, problem.candidate.heavy_tails
    covariance, estimated = _stated_covariance(measured, heavy_tails)
    n = len(estimated)
    lengths = uncertain_lengths(problem.rig)
    slopes_by_length = [_length_sensitivity(problem, z, name)[:n] * sd for name, sd in lengths]
    by_lengths = np.stack(slopes_by_length, axis=1) if lengths else None
    spread = np.square(_by_positions(problem, z))
    if heavy_tails:
        errors = _shared_errors(problem.rig, measured, by_lengths)
        noise = tails.build(covariance + np.diag(spread), estimated, len(measured.positions))
        return replace(problem, noise=noise, shared=np.stack([*errors.values()], axis=1) if errors else None)
    if by_lengths is not None:
        covariance = covariance + by_lengths @ by_lengths.T
    smooth = smooth_covariance(problem, z) if problem.candidate.misfit else None
    noise = noises.build(covariance + np.diag(spread), estimated, smooth)
    return replace(problem, noise=noise, by_lengths=by_lengths)


@dataclass(frozen=True, slots=True)
class ErrorSource:
    """One source of errors of the readings: its kind, the place whose sensors have it, and what it does.

    `effect` (n, m): what one standard uncertainty of each of m independent errors makes of each of the n
    readings [K, W].
    """

    kind: ErrorKind
    place: str
    effect: Array


def error_sources(problem: Problem, z: Array, sigma: float, share: float = 0.0) -> tuple[ErrorSource, ...]:
    """Return the covariance of the readings by source: it is the sum of effect effect' over all of them.

    Uncertain lengths are not among them: `Problem.by_lengths` holds theirs. Nor are errors that are unknowns
    of their own, and a noise with heavy tails is the normal one that tells as much. Arguments: problem; z
    (p,), where hole positions are linearised; sigma [K], the noise of a reading where that is estimated;
    share [1] of a smooth misfit, where the candidate has one.
    """
    random, shared, places = _parts(problem.measured)
    random = np.where(np.isnan(random), sigma, random)
    if problem.candidate.heavy_tails:
        shared = np.where(places == "fin", 0.0, shared)
        random[places == "fin"] *= _widening(problem, z, sigma)
    found = []
    for place in dict.fromkeys(places.tolist()):
        here = places == place
        found.append(ErrorSource("noise", place, np.diag(random)[:, here]))
        found.append(ErrorSource("calibration", place, np.where(here, shared, 0.0)[:, None]))
    if any(sensor.position_sd > 0 for sensor in problem.measured.sensors):
        by_positions = _by_positions(problem, z)
        if problem.candidate.heavy_tails:
            by_positions[places == "fin"] *= _widening(problem, z, sigma)
        found.append(ErrorSource("position", "fin", np.diag(by_positions)[:, places == "fin"]))
    if problem.candidate.misfit:
        weights, axes = np.linalg.eigh(smooth_covariance(problem, z))
        found.append(ErrorSource("misfit", "fin", share * axes * np.sqrt(np.clip(weights, 0.0, None))))
    return tuple(source for source in found if source.effect.any())


def integrated_log_likelihood(problem: Problem, z: Array) -> float:
    """Return ln p(readings | z) at a fitted z (p,), averaged over errors that are unknowns of their own.

    By Laplace's method, so that it is to be compared with that of a candidate whose noise holds these errors.
    """
    log = float(problem.log_likelihood(z[None])[0])
    if problem.shared is None:
        return log
    noise, heavy = problem.noise, problem.noise.heavy
    variances = noise.variances(float(np.exp(z[-1])) if noise.estimated else 0.0)
    seen = (noise.basis.T @ problem.shared) / np.sqrt(variances)[:, None]
    seen[:heavy] /= tails.widening(problem.whitened(z[None])[0][0, :heavy])[:, None]
    errors = z[problem.are_shared]
    curvature = np.eye(len(errors)) + seen.T @ seen
    return log - 0.5 * float(errors @ errors) - 0.5 * float(np.linalg.slogdet(curvature)[1])


def _widening(problem: Problem, z: Array, sigma: float) -> Array:
    """Return what to multiply the scales of fin sensors (n_fin,) by where they count as normal ones."""
    bent = problem.whitened(z[None], sigma)[0][0, : problem.noise.heavy]
    return tails.widening(bent)


def _measure(rig: Rig, readings: Readings) -> tuple[Measured, dict[str, float]]:
    """Sort the sensors that were read: those with noise, those exactly known, the heaters."""
    sensors: list[Sensor] = []
    bounds: list[Sensor] = []
    exact: dict[str, float] = {}
    for place in ("fin", "plate", "air", "heat", "heater"):
        for sensor in rig.sensors.values():
            if sensor.place != place or not is_read(sensor, readings):
                continue
            if place == "heater" and not rig.losses_stated:
                bounds.append(sensor)
            elif place in ("plate", "air") and sensor.exactly_known:
                exact[place] = readings.values[sensor.name]
            else:
                sensors.append(sensor)
    values = np.array([readings.values[s.name] for s in sensors])
    bound_values = np.array([readings.values[s.name] for s in bounds])
    bound_sds = np.array(
        [np.hypot(*_random_and_shared(s, v)) for s, v in zip(bounds, bound_values, strict=True)],
        dtype=np.float64,
    )
    # a place that is exactly known needs no further reading
    kept = [i for i, s in enumerate(sensors) if s.place not in exact]
    return Measured(
        tuple(sensors[i] for i in kept), values[kept], tuple(bounds), bound_values, bound_sds
    ), exact


def _random_and_shared(sensor: Sensor, value: float) -> tuple[float, float]:
    """Return random and common standard uncertainty of one reading [K or W]; nan random when estimated."""
    random = max(sensor.noise, SMALLEST_NOISE) if sensor.noise is not None else np.nan
    if sensor.noise_relative is not None:
        random = sensor.noise_relative * abs(value)
    return random, sensor.calibration_at(value)


def _parts(measured: Measured) -> tuple[Array, Array, NDArray[np.str_]]:
    """Return random and common standard uncertainties of the readings [K, W], and their places, (n,) each."""
    parts = [_random_and_shared(s, v) for s, v in zip(measured.sensors, measured.values, strict=True)]
    random, shared = (np.array([p[i] for p in parts]) for i in (0, 1))
    return random, shared, np.array([s.place for s in measured.sensors])


def _stated_covariance(measured: Measured, apart: bool) -> tuple[Array, NDArray[np.bool_]]:
    """Return the stated part of the covariance (n, n) and which readings have an estimated noise (n,).

    `apart`: whether what the fin's sensors share is an unknown of its own, and not in it.
    """
    random, shared, places = _parts(measured)
    if apart:
        shared = np.where(places == "fin", 0.0, shared)
    estimated = np.isnan(random)
    same_place = places[:, None] == places[None, :]
    covariance = np.where(same_place, np.outer(shared, shared), 0.0)
    return covariance + np.diag(np.where(estimated, 0.0, random**2)), estimated


def _shared_errors(rig: Rig, measured: Measured, by_lengths: Array | None = None) -> dict[str, Array]:
    """Return the errors that are unknowns beside heavy tails, and what one standard uncertainty of each does.

    Arguments: rig; measured; by_lengths (n, n_lengths) [K, W], None where it is not known yet. The effects
    are (n,) each, lengths last.
    """
    _, common, places = _parts(measured)
    common = np.where(places == "fin", common, 0.0)
    found = {"calibration": common} if common.any() else {}
    for i, (name, _) in enumerate(uncertain_lengths(rig)):
        found[f"{name}_error"] = np.zeros_like(common) if by_lengths is None else by_lengths[:, i]
    return found


def _unknowns(
    rig: Rig, candidate: Candidate, measured: Measured, exact: Mapping[str, float]
) -> tuple[list[Parameter], dict[str, float]]:
    """Return the physical parameters of a candidate and what is exactly known."""
    unknown: list[Parameter] = [default("h")]
    fixed: dict[str, float] = dict(exact)

    def add(name: str, quantity: Quantity | None) -> None:
        if quantity is None:
            unknown.append(default(name))
        elif quantity.sd == 0:
            fixed[name] = quantity.value
        else:
            unknown.append(stated(name, quantity))

    read = {s.place for s in measured.sensors}
    add("k", rig.conductivity)
    if candidate.joint:
        unknown.append(default("joint"))
    if candidate.law == "free-convection":
        add("exponent", rig.exponent)
    elif candidate.law == "varying":
        unknown.append(default("rise"))
    if rig.emissivity is not None or candidate.law == "radiating":
        add("emissivity", rig.emissivity)
        if rig.surroundings.temperature is not None:
            add("surroundings", rig.surroundings.temperature)
    if rig.plate is not None and (measured.bounds or "heater" in read):
        for name, quantity in rig.plate.unknowns().items():
            add(name, quantity)
    if "plate" not in exact:
        unknown.append(default("plate" if "plate" in read else "base_temperature"))
    if "air" not in exact:
        if "air" in read:
            unknown.append(default("air"))
        elif rig.surroundings.air is not None:
            add("air", rig.surroundings.air)
        else:
            unknown.append(Parameter("air", UNMEASURED_AIR))
    if candidate.tip == "fixed":
        add("tip_temperature", rig.tip_temperature)
    return unknown, fixed


def uncertain_lengths(rig: Rig) -> list[tuple[str, float]]:
    """Return name and standard uncertainty [m] of each length that is not exactly known."""
    return [(name, quantity.sd) for name, quantity in rig.geometry.items() if quantity.sd > 0]


def smooth_covariance(problem: Problem, z: Array) -> Array:
    """Return what a misfit of share 1 adds to the covariance (n, n) [K²] with the fin as at z (p,)."""
    x, n = problem.measured.positions, len(problem.measured.values)
    values = problem.values(z[None])
    excess = problem.solve(values, x).temperatures[0] - np.ravel(values["air"])[0]
    return misfit.covariance(x, excess, problem.rig.profile().length, n)


def _length_sensitivity(problem: Problem, z: Array, name: str) -> Array:
    """Return d prediction/d length [K/m, W/m] of every reading, by a central difference."""
    length = problem.rig.geometry[name].value
    step = LENGTH_STEP * length
    up, down = (problem.predict(z[None], {name: length + sign * step})[0] for sign in (1, -1))
    slope: Array = (up - down) / (2 * step)
    return slope


def _by_positions(problem: Problem, z: Array) -> Array:
    """Return what one standard uncertainty of its hole's position makes of each reading [K], (n,)."""
    found = np.zeros(len(problem.measured.sensors))
    slopes = temperature_slopes(problem, z)
    for i, sensor in enumerate(problem.measured.sensors):
        if sensor.place == "fin":
            found[i] = slopes[i] * sensor.position_sd
    return found


def temperature_slopes(problem: Problem, z: Array) -> Array:
    """Return dT/dx [K/m] at the fin sensors, by a difference that stays inside the fin."""
    x = problem.measured.positions
    length = problem.rig.profile().length
    step = LENGTH_STEP * length
    low, high = np.maximum(x - step, 0.0), np.minimum(x + step, length)
    found = problem.solve(problem.values(z[None]), np.concatenate([low, high])).temperatures[0]
    slopes: Array = (found[len(x) :] - found[: len(x)]) / (high - low)
    return slopes
