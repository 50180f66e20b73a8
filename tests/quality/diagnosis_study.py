"""Diagnose invented rigs, each healthy or with one fault, and print as JSON what was found and what could be.

Run `python tests/quality/diagnosis_study.py trial 0 100` for the first hundred. Beside each diagnosis stands
that of an ideal observer, who knows how the rigs are made: the size of every fault, how often each is met,
and every uncertainty. Its evidence comes from code of its own: the textbook's pin with a convective tip
behind a joint, and Laplace's method about the mode of each hypothesis.

`restored` in place of `trial` takes rigs with a cause in the fin alone, puts it right by hand, and compares
the heat that this brings with what the diagnosis promised. Nothing here is a measurement.
"""

import json
import math
import sys
import zlib
from dataclasses import dataclass

import numpy as np

from finback import diagnosis
from finback.readings import Readings
from finback.rig import Rig

ZERO = 273.15
KINDS = ("healthy", "joint", "k", "h", "air", "offset", "swap", "shift", "heat")
"""Half of the rigs are healthy, and one fault is as frequent as another."""
CODES = {
    "healthy": "healthy",
    "joint": "joint",
    "k": "low-conductivity",
    "h": "low-convection",
    "air": "air-reference",
    "offset": "sensor-outlier",
    "swap": "sensor-swap",
    "shift": "position-shift",
    "heat": "heat-balance",
}
HEALTHY = 0.5  # of all rigs
JOINT_TIMES, K_TIMES, H_TIMES, OFF, SHIFT, LOSS = 5.0, 0.75, 0.70, 2.0, 3e-3, 0.15
CHANGES = {"h": (0, H_TIMES), "k": (1, K_TIMES), "joint": (2, JOINT_TIMES)}
IN_THE_FIN = tuple(CHANGES)
SPREADS = {"h": 0.05, "k": 0.03, "joint": 0.15}  # of a healthy fin, relative: it was measured when new
LONGEST = np.array([1.0, 1.0, 1.0, 20.0, 20.0])  # step of a Newton iteration
HEAT_NOISE, JOINT, K = 0.02, 5e-5, 167.0


@dataclass(frozen=True)
class Bench:
    """A rig as it is made, SI units."""

    length: float
    diameter: float
    holes: np.ndarray
    noise: float
    calibration: float
    position: float
    h: float

    @property
    def names(self) -> list[str]:
        return [f"T{i}" for i in range(1, len(self.holes) + 1)]

    def rig(self) -> Rig:
        """Return the rig as its owner describes it."""
        sensors = {name: {"at": f"{1e3 * x:.6f} mm"} for name, x in zip(self.names, self.holes, strict=True)}
        sensors |= {"TP": {"on": "plate"}, "TA": {"on": "air"}, "Q": {"on": "heat"}}
        sensors["Q"] |= {"noise": f"{100 * HEAT_NOISE} %", "calibration": "0 %"}
        sensors["defaults"] = {
            "noise": f"{self.noise} K",
            "calibration": f"{self.calibration} K",
            "position": f"{1e3 * self.position} mm",
        }
        return Rig.from_dict(
            {
                "title": "an invented pin of the blind trial",
                "fin": {
                    "profile": "pin",
                    "length": f"{1e3 * self.length:.6f} mm",
                    "diameter": f"{1e3 * self.diameter:.6f} mm",
                    "tip": "convective",
                },
                "material": {"conductivity": f"{K} W/(m K) +/- {100 * SPREADS['k']} %"},
                "joint": {"expected": f"{JOINT} m^2 K/W +/- {100 * SPREADS['joint']} %"},
                "air": {"expected_h": f"{self.h} W/(m^2 K) +/- {100 * SPREADS['h']} %"},
                "sensors": sensors,
            }
        )


@dataclass(frozen=True)
class Case:
    """One rig of the trial: what is wrong, and what was read: fin, plate and air [K], heat [W]."""

    bench: Bench
    kind: str
    sensor: str | None
    truth: np.ndarray  # ln h, ln k, ln joint, plate, air
    values: np.ndarray

    @property
    def readings(self) -> Readings:
        names = [*self.bench.names, "TP", "TA", "Q"]
        return Readings("trial", dict(zip(names, self.values.tolist(), strict=True)))


def predict(bench: Bench, z: np.ndarray, holes: np.ndarray) -> np.ndarray:
    """Predict fin, plate, air and heat of a block z (n, 5): Incropera, Table 3.4, case A, behind a joint."""
    h, k, joint = np.exp(z[:, :3]).T[:, :, None]
    plate, air = z[:, 3:4], z[:, 4:5]
    m = np.sqrt(4 * h / (k * bench.diameter))
    ratio, L = h / (m * k), bench.length
    area = np.pi / 4 * bench.diameter**2
    below = np.cosh(m * L) + ratio * np.sinh(m * L)
    conductance = m * k * (np.sinh(m * L) + ratio * np.cosh(m * L)) / below  # W/(m² K) at the base
    base = (plate - air) / (1 + joint * conductance)
    rest = m * (L - holes)
    fin = air + base * (np.cosh(rest) + ratio * np.sinh(rest)) / below
    return np.concatenate([fin, plate, air, conductance * area * base], axis=1)


def make(number: int, causes_alone: bool = False) -> Case:
    """Make one rig of the trial, healthy or with one fault; with one in the fin where that is asked for."""
    random = np.random.default_rng([20 + causes_alone, number])
    length, n = random.uniform(0.1, 0.15), int(random.integers(6, 11))
    steps = (np.arange(n) + 0.5) / n + random.uniform(-0.2, 0.2, n) / n
    bench = Bench(
        length=length,
        diameter=random.uniform(6e-3, 10e-3),
        holes=length * steps,
        noise=round(float(random.uniform(0.1, 0.3)), 3),
        calibration=round(float(random.uniform(0.05, 0.2)), 3),
        position=0.3e-3,
        h=round(float(random.uniform(20.0, 80.0)), 2),
    )
    kind = KINDS[0] if random.random() < HEALTHY else KINDS[int(random.integers(1, len(KINDS)))]
    if causes_alone:
        kind = IN_THE_FIN[int(random.integers(len(IN_THE_FIN)))]
    widths = [math.sqrt(math.log1p(SPREADS[name] ** 2)) for name in ("h", "k", "joint")]
    z = np.array([math.log(bench.h), math.log(K), math.log(JOINT), 0.0, 0.0])
    z[:3] += np.array(widths) * random.standard_normal(3)
    z[3:] = ZERO + random.uniform(70.0, 100.0), ZERO + random.uniform(18.0, 25.0)
    if kind in CHANGES:
        z[CHANGES[kind][0]] += math.log(CHANGES[kind][1])
    at, sign = int(random.integers(n)), random.choice([-1.0, 1.0])
    holes = bench.holes + bench.position * random.standard_normal(n)
    if kind == "shift":
        holes[at] = np.clip(holes[at] + sign * SHIFT, 0.0, length)
    values = predict(bench, z[None], holes)[0]
    values[-1] *= 1 + HEAT_NOISE * random.standard_normal()
    values[:-1] += bench.noise * random.standard_normal(n + 2)
    values[:-1] += bench.calibration * np.append(
        np.full(n, random.standard_normal()), random.standard_normal(2)
    )
    sensor = None
    if kind == "air":
        values[-2] += sign * OFF
        sensor = "TA"
    elif kind == "offset":
        values[at] += sign * OFF
    elif kind == "swap":
        at = min(at, n - 2)
        values[[at, at + 1]] = values[[at + 1, at]]
    elif kind == "heat":
        values[-1] /= 1 - LOSS
        sensor = "Q"
    if kind in ("offset", "swap", "shift"):
        sensor = bench.names[at]
    return Case(bench, kind, sensor, z, values)


def ideal(case: Case) -> dict[tuple[str, str | None], float]:
    """Return what one who knows how the rigs are made would say: probabilities by kind and sensor."""
    bench, n = case.bench, len(case.bench.holes)
    hypotheses = list(_hypotheses(case))
    values = np.array([each[2] for each in hypotheses])
    holes = np.array([each[3] for each in hypotheses])
    means = np.array([each[4] for each in hypotheses])
    shares = np.array([each[1] for each in hypotheses])
    widths = [math.sqrt(math.log1p(SPREADS[name] ** 2)) for name in ("h", "k", "joint")]
    weights = 1 / np.square([*widths, 1e3, 1e3])
    z = means.copy()
    z[:, 3], z[:, 4] = case.values[n], case.values[n + 1]

    def at(block: np.ndarray) -> np.ndarray:  # (H, s, 5) -> (H, s, n + 3)
        return np.stack([predict(bench, b, x) for b, x in zip(block, holes, strict=True)])

    step = 1e-4
    stencil = step * np.concatenate([np.zeros((1, 5)), np.eye(5), -np.eye(5)])
    for _ in range(12):
        found = at(z[:, None] + stencil)
        slopes = (found[:, 1:6] - found[:, 6:]).transpose(0, 2, 1) / (2 * step)
        covariance = _covariance(bench, z, holes, found[:, 0])
        inverse = np.linalg.inv(covariance)
        residuals = values - found[:, 0]
        curvature = slopes.transpose(0, 2, 1) @ inverse @ slopes + np.diag(weights)
        gradient = np.einsum("hnp,hnm,hm->hp", slopes, inverse, residuals) - weights * (z - means)
        z = z + np.clip(np.linalg.solve(curvature, gradient[..., None])[..., 0], -LONGEST, LONGEST)
    squares = np.einsum("hn,hnm,hm->h", residuals, inverse, residuals) + (weights * (z - means) ** 2).sum(
        axis=1
    )
    logs = -0.5 * (squares + np.linalg.slogdet(covariance)[1] + np.linalg.slogdet(curvature)[1]) + np.log(
        shares
    )
    posterior = np.exp(logs - logs.max())
    posterior /= posterior.sum()
    told: dict[tuple[str, str | None], float] = {}
    for each, share in zip(hypotheses, posterior, strict=True):
        told[each[0]] = told.get(each[0], 0.0) + float(share)
    return told


def _covariance(bench: Bench, z: np.ndarray, holes: np.ndarray, found: np.ndarray) -> np.ndarray:
    n = len(bench.holes)
    there = np.stack([predict(bench, b[None], x + 1e-5)[0] for b, x in zip(z, holes, strict=True)])
    gradients = (there[:, :n] - found[:, :n]) / 1e-5
    variances = np.full((len(z), n + 3), bench.noise**2)
    variances[:, :n] += np.square(gradients * bench.position)
    variances[:, n : n + 2] += bench.calibration**2
    variances[:, -1] = np.square(HEAT_NOISE * found[:, -1])
    covariance = variances[:, :, None] * np.eye(n + 3)
    covariance[:, :n, :n] += bench.calibration**2
    return covariance


def _hypotheses(case: Case):
    """Yield label, share beforehand, readings put right, holes, means beforehand of each hypothesis."""
    bench, n, y = case.bench, len(case.bench.holes), case.values
    healthy = np.array([math.log(bench.h), math.log(K), math.log(JOINT), ZERO + 85.0, ZERO + 21.0])
    whole = (1 - HEALTHY) / (len(KINDS) - 1)
    yield ("healthy", None), HEALTHY, y, bench.holes, healthy
    for number, (kind, times) in enumerate((("h", H_TIMES), ("k", K_TIMES), ("joint", JOINT_TIMES))):
        moved = healthy.copy()
        moved[number] += math.log(times)
        yield (kind, None), whole, y, bench.holes, moved
    yield ("heat", "Q"), whole, np.append(y[:-1], y[-1] * (1 - LOSS)), bench.holes, healthy
    for sign in (-1.0, 1.0):
        right = y.copy()
        right[-2] -= sign * OFF
        yield ("air", "TA"), whole / 2, right, bench.holes, healthy
        for at, name in enumerate(bench.names):
            right = y.copy()
            right[at] -= sign * OFF
            yield ("offset", name), whole / 2 / n, right, bench.holes, healthy
            holes = bench.holes.copy()
            holes[at] = np.clip(holes[at] + sign * SHIFT, 0.0, bench.length)
            yield ("shift", name), whole / 2 / n, y, holes, healthy
    chosen = [min(at, n - 2) for at in range(n)]
    for at in range(n - 1):
        right = y.copy()
        right[[at, at + 1]] = right[[at + 1, at]]
        yield ("swap", bench.names[at]), whole * chosen.count(at) / n, right, bench.holes, healthy


def trial(number: int) -> dict[str, object]:
    """Diagnose one rig: what is wrong with it, what was said, and what the ideal observer would say."""
    case = make(number)
    found = diagnosis.diagnose(case.bench.rig(), case.readings, seed=zlib.crc32(b"%d" % number) % 1000)
    said = [(cause.code, cause.sensor, cause.probability) for cause in found.causes]
    best = sorted(ideal(case).items(), key=lambda item: -item[1])
    return {
        "number": number,
        "kind": case.kind,
        "truth": (CODES[case.kind], case.sensor),
        "said": said,
        "ideal": [(CODES[kind], sensor, share) for (kind, sensor), share in best[:6]],
        "next": [each.what for each in found.next_measurements[:2]],
    }


def restored(number: int) -> dict[str, object]:
    """Put the cause of one rig right by hand: heat recovered, and the interval that was promised for it."""
    case = make(number, causes_alone=True)
    found = diagnosis.diagnose(case.bench.rig(), case.readings, seed=number)
    before = case.truth
    after = before.copy()
    after[CHANGES[case.kind][0]] -= math.log(CHANGES[case.kind][1])
    heats = predict(case.bench, np.array([before, after]), case.bench.holes)[:, -1]
    cause = next((each for each in found.causes if each.code == CODES[case.kind]), None)
    promised = None if cause is None else cause.heat_recovered
    return {
        "number": number,
        "kind": case.kind,
        "probability": 0.0 if cause is None else cause.probability,
        "recovered": float(heats[1] - heats[0]),
        "promised": None if promised is None else [promised.median, promised.low95, promised.high95],
    }


if __name__ == "__main__":
    study = {"trial": trial, "restored": restored}[sys.argv[1]]
    json.dump([study(number) for number in range(int(sys.argv[2]), int(sys.argv[3]))], sys.stdout)
