"""Invented campaigns whose runs share what a pooled estimate takes them to share, with the truth behind each.

Readings come from the forward physics alone: the true holes and the true diameter go into it, where the
estimate has them to first order. Every error is drawn once for a campaign, noise for each reading.
"""

from dataclasses import dataclass, replace

import numpy as np
from rigs import Truth

from finback import pooled, rig
from finback.pooled_conclusions import Pooled
from finback.pooled_model import OWN_SHARE
from finback.pooled_runs import Pool, Row
from finback.readings import Readings
from finback.rig import Rig

ZERO = 273.15
RIG = """title = "An invented pin behind a joint"
[fin]
profile = "pin"
length = "120 mm"
diameter = "8 mm +/- 0.03 mm"
tip = "convective"
[material]
conductivity = "167 W/(m K) +/- 5 %"
[sensors.defaults]
noise = "0.15 K"
calibration = "0.1 K"
position = "0.3 mm"
[sensors]
T1 = { at = "5 mm" }
T2 = { at = "35 mm" }
T3 = { at = "65 mm" }
T4 = { at = "112 mm" }
TP = { on = "plate" }
TA = { on = "air" }
Q = { on = "heat", noise = "3 %", calibration = "1 %" }
"""


@dataclass(frozen=True)
class Errors:
    """What is wrong with a rig in every run, and what is true of it: offsets, holes, lengths [m]."""

    offsets: dict[str, float]
    holes: dict[str, float]
    lengths: dict[str, float]
    k: float
    joint: float


def described(text: str = RIG) -> Rig:
    """Return the rig."""
    return rig.read_bytes(text.encode())


def draw_errors(rig: Rig, rng: np.random.Generator) -> Errors:
    """Draw once what all runs of a campaign share."""
    common = {place: rng.standard_normal() for place in ("fin", "plate", "air", "heat", "heater")}
    offsets = {}
    for name, sensor in rig.sensors.items():
        alone = len(rig.sensors_on(sensor.place)) == 1 and sensor.place != "fin"
        own = 0.0 if alone else OWN_SHARE
        score = np.sqrt(1 - own) * common[sensor.place] + np.sqrt(own) * rng.standard_normal()
        offsets[name] = score * (sensor.calibration_relative or sensor.calibration)
    width = np.sqrt(np.log1p(0.05**2))
    return Errors(
        offsets=offsets,
        holes={s.name: s.position + rng.normal(0.0, s.position_sd) for s in rig.fin_sensors()},
        lengths={name: rng.normal(q.value, q.sd) for name, q in rig.geometry.items()},
        k=167 * np.exp(width * rng.standard_normal()),
        joint=6e-5 * np.exp(0.4 * rng.standard_normal()),
    )


def read(rig: Rig, errors: Errors, truth: Truth, rng: np.random.Generator) -> dict[str, float]:
    """Return what the sensors read in one run."""
    fin = rig.fin_sensors()
    solution = truth.solve(rig, np.array([errors.holes[s.name] for s in fin]))
    exact = dict(zip((s.name for s in fin), solution.temperatures[0].tolist(), strict=True))
    others = {"plate": truth.plate, "air": truth.air, "heat": float(solution.base_heat[0])}
    exact |= {s.name: others[s.place] for s in rig.sensors.values() if s.place != "fin"}
    values = {}
    for name, value in exact.items():
        sensor = rig.sensors[name]
        scatter = abs(value) * sensor.noise_relative if sensor.noise_relative else sensor.noise or 0.15
        offset = errors.offsets[name] * (value if sensor.calibration_relative else 1.0)
        values[name] = float(value + offset + scatter * rng.standard_normal())
    return values


def campaign(number: int, runs: int, text: str = RIG, seed: int = 2024) -> tuple[Pool, Errors, np.ndarray]:
    """Return the runs of one campaign, its errors, and the true h of each run."""
    rng = np.random.default_rng([seed, number])
    rig = described(text)
    errors = draw_errors(rig, rng)
    h = np.exp(rng.uniform(np.log(20.0), np.log(80.0), runs))
    rows = []
    for i, each in enumerate(h):
        truth = Truth(
            h=float(each),
            k=errors.k,
            joint=errors.joint,
            plate=ZERO + rng.uniform(50.0, 90.0),
            air=ZERO + rng.uniform(18.0, 26.0),
            lengths=errors.lengths,
        )
        name = f"run {i + 1}"
        rows.append(Row(name, "run", Readings(name, read(rig, errors, truth, rng))))
    return Pool(rig, ("k", "joint"), tuple(rows)), errors, h


def without_heat(pool: Pool, kept: int) -> Pool:
    """Return the pool with heat read in its first runs only."""
    rows = []
    for i, row in enumerate(pool.rows):
        values = {n: v for n, v in row.readings.values.items() if n != "Q" or i < kept}
        rows.append(replace(row, readings=Readings(row.name, values)))
    return replace(pool, rows=tuple(rows))


def scores(found: Pooled, errors: Errors, h: np.ndarray) -> dict[str, np.ndarray]:
    """Return where the truth lies, in standard deviations from the mean, and whether intervals hold it."""
    truths = {"k": errors.k, "joint": errors.joint, "joint_times_k": errors.k * errors.joint}
    held = {n: np.array([found.shared[n].low95 <= t <= found.shared[n].high95]) for n, t in truths.items()}
    held["h"] = (found.runs.h_low95 <= h) & (h <= found.runs.h_high95)
    holes = [1e3 * (errors.holes[e.name] - found.pool.rig.sensors[e.name].position) for e in found.holes]
    away = {
        "offsets": [(e.mean - errors.offsets[e.name]) / e.sd for e in found.offsets],
        "holes": [(e.mean - t) / e.sd for e, t in zip(found.holes, holes, strict=True)],
        "lengths": [(e.mean - 1e3 * (errors.lengths[e.name] - 0.008)) / e.sd for e in found.lengths
                    if e.name == "diameter"],
    }  # fmt: skip
    held |= {name: np.abs(np.array(each)) < 1.96 for name, each in away.items()}
    held |= {
        f"{n}_score": np.array([(found.shared[n].mean - t) / found.shared[n].sd]) for n, t in truths.items()
    }
    return held


def study(count: int, runs: int, first: int = 0, text: str = RIG) -> dict[str, np.ndarray]:
    """Return the scores of many campaigns, (count, ...) each."""
    found = []
    for number in range(first, first + count):
        pool, errors, h = campaign(number, runs, text)
        found.append(scores(pooled.estimate(pool, seed=1), errors, h))
    return {name: np.array([each[name] for each in found]) for name in found[0]}


if __name__ == "__main__":
    import sys

    for name, each in study(int(sys.argv[1]), int(sys.argv[2])).items():
        print(f"{name:>20} {each.mean():.4f} {each.std():.4f} {each.size}")  # noqa: T201
