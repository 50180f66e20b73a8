"""What to measure next: what each further reading is expected to tell of the cause, and of h.

Each hypothesis predicts a further reading as a normal distribution: from its mode, its unknowns' covariance
and the reading's own noise. How much a reading would reduce the doubt about the cause is the mutual
information of the two, an average over readings drawn from all hypotheses, in bits: 1 bit settles a doubt
between two causes that are as likely as each other. Source: Lindley, Ann. Math. Statist. 27 (1956) 986.
"""

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from finback.faults import key
from finback.hypotheses import Hypothesis
from finback.models import Solution, solve
from finback.rig import Rig, Sensor
from finback.suspects import CHANGES

Array = NDArray[np.float64]

SAMPLES = 300  # readings drawn for each
FEWEST = 4  # of one hypothesis
KEPT = 40  # hypotheses, the likeliest ones
LEAST = 1e-4  # probability of one that is kept
OPEN_LEVEL = 1e3  # K; of a temperature that nobody knows beforehand
LEVEL = 1.0  # times the excess temperature, that a second level may differ from what is asked for
USUAL_TEMPERATURE = 350.0  # K, at which a calibration in per cent or by class is taken
DIFFERENCE = 1e-4
PLACES = 8  # along the fin, for another hole
APART = 0.04  # of the length, that another hole keeps from those there are
HIGHER = 1.6  # times the excess temperature of the plate, as a second level
AVERAGED = 0.25  # noise of an air reading after a longer average
USUAL_NOISE = 0.2  # K, of a thermometer where the rig leaves noise out
HEAT_NOISE = 0.03  # of a heat reading that is added
USUAL_JOINT = 1e-4  # m² K/W, where the rig does not say what a healthy one has
JOINT_SPREAD = math.log(2.0)
PLATE = "plate thermocouple"
NEARLY = 0.7  # of the best gain, from which what nothing reads at all comes first
WORTH = 0.005  # bits from which a measurement is listed
NARROWER = 0.97  # or the sd of h by which it is


@dataclass(frozen=True, slots=True)
class NextMeasurement:
    """One thing to measure.

    `what`, and `how` in words; `expected_gain` [bits] about the cause; `message`, all of it; `h_sd_ratio`,
    the standard deviation of h afterwards over that of now [1].
    """

    what: str
    how: str
    expected_gain: float
    message: str
    h_sd_ratio: float


@dataclass(frozen=True, slots=True)
class Predicted:
    """What a hypothesis predicts: `mean` (d,), `by_unknowns` (d, p), `own` (d, d), all that is not theirs."""

    mean: Array
    by_unknowns: Array
    own: Array


@dataclass(frozen=True)
class _Option:
    what: str
    words: str
    predict: Callable[[Hypothesis], Predicted]


def rank(rig: Rig, found: Sequence[Hypothesis], seed: np.random.SeedSequence) -> tuple[NextMeasurement, ...]:
    """Return what to measure next, best first.

    Arguments: rig; found, hypotheses with their weights; seed of the readings that are drawn.
    """
    logs = np.array([each.log_weight for each in found])
    shares = np.exp(logs - logs.max())
    shares /= shares.sum()
    order = np.argsort(-shares)[:KEPT]
    order = order[shares[order] > LEAST]
    kept = [found[at] for at in order]
    weights = shares[order] / shares[order].sum()
    labels = [_label(each) for each in kept]
    listed = []
    for option in _options(rig, kept, weights):
        predicted = [option.predict(each) for each in kept]
        gain = _gain(predicted, kept, weights, labels, np.random.default_rng(seed))
        ratio = _narrowing(predicted, kept, weights)
        if gain > WORTH or ratio < NARROWER:
            message = _message(option.words, gain, ratio)
            listed.append(NextMeasurement(option.what, option.words, gain, message, ratio))
    listed.sort(key=lambda each: (-round(each.expected_gain, 3), each.h_sd_ratio))
    best = listed[0].expected_gain if listed else 0.0
    listed.sort(key=lambda each: each.what != PLATE or each.expected_gain < NEARLY * best)
    return tuple(_one_hole(listed))


def doubt(found: Sequence[Hypothesis]) -> float:
    """Return what is open about what is wrong [bits], by hypotheses with their weights."""
    logs = np.array([each.log_weight for each in found])
    weights = np.exp(logs - logs.max())
    shares: dict[tuple[str, ...], float] = {}
    for each, weight in zip(found, (weights / weights.sum()).tolist(), strict=True):
        shares[_label(each)] = shares.get(_label(each), 0.0) + weight
    return float(_entropy(np.array(list(shares.values()))))


def _label(hypothesis: Hypothesis) -> tuple[str, ...]:
    """Return what is wrong by a hypothesis, whatever the candidate."""
    return tuple(sorted(map(str, map(key, hypothesis.suspects))))


def _one_hole(listed: Sequence[NextMeasurement]) -> Iterator[NextMeasurement]:
    """Yield the measurements with the best place of another hole alone."""
    seen = False
    for each in listed:
        is_hole = each.what.startswith("hole")
        if not (is_hole and seen):
            yield each
        seen = seen or is_hole


def _message(words: str, gain: float, ratio: float) -> str:
    told = f"{words}: {gain:.2f} bit about the cause" if gain > WORTH else f"{words}: little about the cause"
    if ratio < NARROWER:
        return f"{told}, and an interval of h {100 * (1 - ratio):.0f} % narrower."
    return f"{told}; the interval of h stays as it is."


def _gain(
    predicted: Sequence[Predicted],
    kept: Sequence[Hypothesis],
    weights: Array,
    labels: Sequence[tuple[str, ...]],
    random: np.random.Generator,
) -> float:
    """Return the mutual information [bits] of cause and reading."""
    means = np.array([each.mean for each in predicted])
    covariances = np.array(
        [
            each.own + each.by_unknowns @ hypothesis.spread @ each.by_unknowns.T
            for each, hypothesis in zip(predicted, kept, strict=True)
        ]
    )
    lower = np.linalg.cholesky(covariances)
    whiten = np.linalg.inv(lower)
    log_dets = np.log(np.einsum("hdd->hd", lower)).sum(axis=1)
    drawn = np.repeat(np.arange(len(kept)), _counts(weights))
    y = means[drawn] + np.einsum(
        "sde,se->sd", lower[drawn], random.standard_normal((len(drawn), means.shape[1]))
    )
    white = np.einsum("hde,she->shd", whiten, y[:, None] - means)
    logs = np.log(weights) - log_dets - 0.5 * np.square(white).sum(axis=-1)
    posterior = np.exp(logs - logs.max(axis=1, keepdims=True))
    posterior /= posterior.sum(axis=1, keepdims=True)
    groups = sorted(set(labels))
    member = np.array([[label == group for group in groups] for label in labels], dtype=np.float64)
    importance = weights[drawn] / _counts(weights)[drawn]
    after = _entropy(posterior @ member)
    return max(float(_entropy((weights @ member)[None])[0] - (importance @ after) / importance.sum()), 0.0)


def _counts(weights: Array) -> NDArray[np.intp]:
    """Return how many readings are drawn of each hypothesis: of the unlikely ones a few as well."""
    counts = np.maximum(np.round(SAMPLES * np.sqrt(weights) / np.sqrt(weights).sum()), FEWEST)
    return np.asarray(counts, dtype=np.intp)


def _entropy(shares: Array) -> Array:
    safe = np.where(shares > 0, shares, 1.0)
    return np.asarray(-(shares * np.log2(safe)).sum(axis=-1))


def _narrowing(predicted: Sequence[Predicted], kept: Sequence[Hypothesis], weights: Array) -> float:
    """Return the sd of ln h afterwards over that of now, on average over the hypotheses."""
    before = after = 0.0
    for each, hypothesis, weight in zip(predicted, kept, weights, strict=True):
        at = hypothesis.base.problem.names.index("h")
        spread = hypothesis.spread
        with_h = each.by_unknowns @ spread[:, at]
        covariance = each.own + each.by_unknowns @ spread @ each.by_unknowns.T
        before += weight * spread[at, at]
        after += weight * (spread[at, at] - with_h @ np.linalg.solve(covariance, with_h))
    return math.sqrt(max(after, 0.0) / before)


def _options(rig: Rig, kept: Sequence[Hypothesis], weights: Array) -> Iterator[_Option]:
    """Yield everything that could be measured on this rig."""
    problem = kept[0].base.problem
    read = {sensor.place for sensor in problem.measured.sensors} | set(problem.fixed)
    fin = [sensor for sensor in problem.measured.sensors if sensor.place == "fin"]
    noise = math.hypot(_noise(fin[0]), _calibration(fin[0]))
    if "plate" not in read:
        yield _Option(PLATE, "A thermocouple on the plate, beside the base", _plate(noise))
    if not any(map(rig.tells_heat, read)):
        yield _Option("heat flow", "The heat into the fin, to 3 %", _heat)
    for sensor in problem.measured.sensors:
        if sensor.place == "air":
            yield _Option(
                "longer air average", "A longer average of the air temperature", _air(_noise(sensor), sensor)
            )
    yield _Option(
        "second air thermometer", "Another thermometer in the air beside the fin", _air(noise, None)
    )
    x = rig.length * (np.arange(PLACES) + 0.5) / PLACES
    holes = np.array([sensor.position or 0.0 for sensor in fin])
    for place in x:
        if np.abs(holes - place).min() > APART * rig.length:
            words = f"Another hole, {1e3 * place:.0f} mm from the base"
            yield _Option(f"hole at {1e3 * place:.0f} mm", words, _hole(float(place), fin[0]))
    yield _Option(
        "isothermal zero reading",
        "A reading of all thermometers at one temperature, before heating",
        _isothermal,
    )
    yield _Option("second power level", "A second run with more heat", _second_level)
    suspected = _suspected(kept, weights, fin)
    if suspected is not None:
        first, other = suspected
        words = f"{first.name} and {other.name} exchanged, probe for probe, and read again"
        yield _Option(f"swap test of {first.name} and {other.name}", words, _swap_test(first, other))


def _noise(sensor: Sensor) -> float:
    return USUAL_NOISE if sensor.noise is None else max(sensor.noise, 1e-3)


def _calibration(sensor: Sensor) -> float:
    return sensor.calibration_at(USUAL_TEMPERATURE)


def _suspected(
    kept: Sequence[Hypothesis], weights: Array, fin: Sequence[Sensor]
) -> tuple[Sensor, Sensor] | None:
    """Return the fin's most suspected sensor and its neighbour."""
    if len(fin) < 2:
        return None
    names = [sensor.name for sensor in fin]
    doubts = dict.fromkeys(names, 0.0)
    for each, weight in zip(kept, weights.tolist(), strict=True):
        for suspect in each.suspects:
            if suspect.kind in ("offset", "shift", "swap") and suspect.sensor in doubts:
                doubts[suspect.sensor] += weight
    at = names.index(max(names, key=lambda name: doubts[name]))
    ordered = sorted(fin, key=lambda sensor: sensor.position or 0.0)
    place = ordered.index(fin[at])
    return ordered[place], ordered[place - 1 if place else 1]


def _with_slopes(hypothesis: Hypothesis, predict: Callable[[Array], Array]) -> tuple[Array, Array]:
    """Return a prediction (d,) at a hypothesis's mode and its slopes (d, p)."""
    z, p = hypothesis.mean, len(hypothesis.mean)
    offsets = DIFFERENCE * np.concatenate([np.zeros((1, p)), np.eye(p), -np.eye(p)])
    found = predict(z + offsets)
    return found[0], (found[1 : p + 1] - found[p + 1 :]).T / (2 * DIFFERENCE)


def _values(hypothesis: Hypothesis, z: Array) -> Mapping[str, Array | float]:
    return hypothesis.base.problem.values(z)


def _fin(hypothesis: Hypothesis, values: Mapping[str, Array | float], x: Array) -> Solution:
    problem = hypothesis.base.problem
    return solve(*problem.rig.build(values, problem.candidate.tip), x)


def _plate(noise: float) -> Callable[[Hypothesis], Predicted]:
    """Predict a plate that nobody read: as much hotter than the base as a joint makes it."""

    def predict(hypothesis: Hypothesis) -> Predicted:
        bad = any(suspect.kind == "joint" for suspect in hypothesis.suspects)
        shift, spread = CHANGES["joint"] if bad else (0.0, 0.0)
        resistance = USUAL_JOINT * math.exp(shift)

        def plate(z: Array) -> Array:
            solution = _fin(hypothesis, _values(hypothesis, z), np.zeros(0))
            area = float(hypothesis.base.problem.rig.profile().area(np.zeros(1))[0])
            drop = resistance * solution.base_heat / area
            return np.stack([solution.base_temperature + drop, drop], axis=1)

        both, slopes = _with_slopes(hypothesis, plate)
        own = noise**2 + (both[1] * math.hypot(JOINT_SPREAD, spread)) ** 2
        return Predicted(both[:1], slopes[:1], np.array([[own]]))

    return predict


def _heat(hypothesis: Hypothesis) -> Predicted:
    def heat(z: Array) -> Array:
        return _fin(hypothesis, _values(hypothesis, z), np.zeros(0)).base_heat[:, None]

    mean, slopes = _with_slopes(hypothesis, heat)
    return Predicted(mean, slopes, np.diag(np.square(HEAT_NOISE * mean)))


def _air(noise: float, sensor: Sensor | None) -> Callable[[Hypothesis], Predicted]:
    """Predict an air temperature: another thermometer's, or a longer average of the one there is."""

    def predict(hypothesis: Hypothesis) -> Predicted:
        def air(z: Array) -> Array:
            return np.broadcast_to(_values(hypothesis, z)["air"], (len(z),))[:, None]

        mean, slopes = _with_slopes(hypothesis, air)
        if sensor is None:
            return Predicted(mean, slopes, np.array([[noise**2]]))
        if _are_wrong(hypothesis, [sensor], "air")[0]:  # it reads what it read
            read = hypothesis.values[_numbers(hypothesis, [sensor])]
            return Predicted(read, np.zeros_like(slopes), np.array([[(1 + AVERAGED**2) * noise**2]]))
        return Predicted(mean, slopes, np.array([[(AVERAGED * noise) ** 2]]))

    return predict


def _hole(place: float, like: Sensor) -> Callable[[Hypothesis], Predicted]:
    def predict(hypothesis: Hypothesis) -> Predicted:
        x = np.array([place])

        def temperature(z: Array) -> Array:
            return _fin(hypothesis, _values(hypothesis, z), x).temperatures

        mean, slopes = _with_slopes(hypothesis, temperature)
        slope = _gradients(hypothesis, x)[0]
        own = _noise(like) ** 2 + _calibration(like) ** 2 + (slope * like.position_sd) ** 2
        return Predicted(mean, slopes, np.array([[own]]))

    return predict


def _gradients(hypothesis: Hypothesis, x: Array) -> Array:
    """Return dT/dx [K/m] at places along the fin by a hypothesis's mode."""
    length = hypothesis.base.problem.rig.length
    low, high = np.maximum(x - DIFFERENCE * length, 0.0), np.minimum(x + DIFFERENCE * length, length)
    values = _values(hypothesis, hypothesis.mean[None])
    found = _fin(hypothesis, values, np.concatenate([low, high])).temperatures[0]
    return np.asarray((found[len(x) :] - found[: len(x)]) / (high - low))


def _numbers(hypothesis: Hypothesis, sensors: Sequence[Sensor]) -> list[int]:
    names = [each.name for each in hypothesis.base.problem.measured.sensors]
    return [names.index(sensor.name) for sensor in sensors]


def _are_wrong(hypothesis: Hypothesis, sensors: Sequence[Sensor], kind: str) -> Array:
    """Return 1 for each sensor that is wrong in this way by a hypothesis, 0 for others."""
    wrong = {suspect.sensor for suspect in hypothesis.suspects if suspect.kind == kind}
    return np.array([float(sensor.name in wrong) for sensor in sensors])


def _errors(hypothesis: Hypothesis, z: Array, sensors: Sequence[Sensor]) -> Array:
    """Return what sensors read more than a block of unknowns (n_sets, p) makes of them (n_sets, m) [K]."""
    at = _numbers(hypothesis, sensors)
    return np.asarray(hypothesis.values[at] - hypothesis.base.problem.predict(z)[:, at])


def _isothermal(hypothesis: Hypothesis) -> Predicted:
    """Predict all thermometers at one temperature that nobody need know: what is wrong with one is left."""
    sensors = [s for s in hypothesis.base.problem.measured.sensors if s.place in ("fin", "plate")]
    wrong = _are_wrong(hypothesis, sensors, "offset")
    mean, slopes = _with_slopes(hypothesis, lambda z: wrong * _errors(hypothesis, z, sensors))
    own = np.diag(np.square([_noise(sensor) for sensor in sensors]) * (1 + wrong)) + OPEN_LEVEL**2
    return Predicted(mean, slopes, own)


def _second_level(hypothesis: Hypothesis) -> Predicted:
    """Predict all temperatures once more with a hotter plate, whose temperature is not known beforehand."""
    problem = hypothesis.base.problem
    fin = [sensor for sensor in problem.measured.sensors if sensor.place == "fin"]
    sensors = [*fin, *(s for s in problem.measured.sensors if s.place == "plate")]
    x = np.array([sensor.position for sensor in fin])
    probes, holes = (_are_wrong(hypothesis, sensors, kind) for kind in ("offset", "shift"))
    order = np.arange(len(sensors))
    for suspect in hypothesis.suspects:  # exchanged probes stay where they are
        if suspect.kind == "swap":
            pair = [[s.name for s in fin].index(str(each)) for each in (suspect.sensor, suspect.other)]
            order[pair] = order[pair[::-1]]

    def temperatures(z: Array, more: float = HIGHER) -> Array:
        values = dict(_values(hypothesis, z))
        hot = "plate" if "plate" in values else "base_temperature"
        values[hot] = values["air"] + more * (np.asarray(values[hot]) - values["air"])
        found = np.empty((len(z), len(sensors)))
        found[:, : len(fin)] = _fin(hypothesis, values, x).temperatures
        found[:, len(fin) :] = np.reshape(values[hot], (-1, 1))
        return (found + (probes + more * holes) * _errors(hypothesis, z, sensors))[:, order]

    mean, slopes = _with_slopes(hypothesis, temperatures)
    by_level = (temperatures(hypothesis.mean[None], HIGHER + 0.01) - mean)[0] / 0.01
    own = np.square([_noise(sensor) for sensor in sensors]) * (1 + probes + HIGHER**2 * holes)
    own[: len(fin)] += np.square(HIGHER * _gradients(hypothesis, x) * [s.position_sd for s in fin])
    shared = np.array([_calibration(sensor) for sensor in sensors])
    alike = np.array([[a.place == b.place for b in sensors] for a in sensors])
    # the level itself is unknown: what only tells of it is as good as not read
    whole = np.diag(own) + np.where(alike, np.outer(shared, shared), 0.0)
    return Predicted(mean, slopes, whole + LEVEL**2 * np.outer(by_level, by_level))


def _swap_test(first: Sensor, other: Sensor) -> Callable[[Hypothesis], Predicted]:
    """Predict two probes, each in the other's hole: what is wrong with a probe goes with it."""
    pair = [first, other]

    def predict(hypothesis: Hypothesis) -> Predicted:
        x = np.array([sensor.position for sensor in pair])
        probes, holes = (_are_wrong(hypothesis, pair, kind) for kind in ("offset", "shift"))
        exchanged = {each for s in hypothesis.suspects if s.kind == "swap" for each in (s.sensor, s.other)}
        order = [0, 1] if exchanged == {first.name, other.name} else [1, 0]

        def temperatures(z: Array) -> Array:
            """Return what the first and the other probe read, each in the hole of the other."""
            errors = _errors(hypothesis, z, pair)
            in_holes = _fin(hypothesis, _values(hypothesis, z), x).temperatures + holes * errors
            return in_holes[:, order] + probes * errors

        mean, slopes = _with_slopes(hypothesis, temperatures)
        own = _noise(first) ** 2 * (1 + probes + holes[order])
        own = own + np.square(_gradients(hypothesis, x) * [s.position_sd for s in pair])[order]
        return Predicted(mean, slopes, np.diag(own))

    return predict
