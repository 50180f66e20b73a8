"""Make the readings of the invented bench pin, healthy and with a loose joint, from known truth.

Run `python tests/inverse/make_bench_pin.py` to write them into datasets/; a test makes them again and
compares. Every error that rig.toml states is drawn once, as it would happen on a bench: noise for each
reading, one calibration offset for each kind of sensor, a misplacement for each hole. What rig.toml says of
the conductivity and the diameter is right.
"""

import csv
import io
import json
from pathlib import Path

import numpy as np

from finback.models import ConvectiveTip, Fin, Joint, UniformCoefficient, pin, solve

ZERO_CELSIUS = 273.15
SEED = 1
COEFFICIENT, CONDUCTIVITY = 45.0, 167.0  # W/(m² K), W/(m K)
LENGTH, DIAMETER = 0.120, 0.008  # m
PLATE, AIR = 80.0, 22.0  # degC
HOLES = np.array([5, 20, 35, 50, 65, 80, 95, 112]) * 1e-3  # m
NOISE, CALIBRATION, POSITION, HEAT_NOISE = 0.15, 0.1, 0.3e-3, 0.03  # K, K, m, 1
RESISTANCES = {"bench-pin": 5e-5, "bench-pin-loose-joint": 4e-4}  # m² K/W


def make(name: str) -> dict[str, str]:
    """Return the text of readings.csv and truth.json of one version, by file name."""
    resistance = RESISTANCES[name]
    rng = np.random.default_rng([SEED, sorted(RESISTANCES).index(name)])
    fin = Fin(pin(LENGTH, DIAMETER), CONDUCTIVITY, UniformCoefficient(COEFFICIENT), ConvectiveTip())
    base = Joint(PLATE + ZERO_CELSIUS, resistance)
    holes = HOLES + POSITION * rng.standard_normal(HOLES.size)
    solution = solve(fin, base, AIR + ZERO_CELSIUS, holes)
    heat = float(solution.base_heat[0])

    offsets = CALIBRATION * rng.standard_normal(3)  # fin, plate, air: sensors of one kind share theirs
    noise = NOISE * rng.standard_normal(HOLES.size + 2)
    along = solution.temperatures[0] - ZERO_CELSIUS + offsets[0] + noise[: HOLES.size]
    row = {f"T{number}": f"{value:.2f}" for number, value in enumerate(along, start=1)}
    row["TP"] = f"{PLATE + offsets[1] + noise[-2]:.2f}"
    row["TA"] = f"{AIR + offsets[2] + noise[-1]:.2f}"
    row["Q"] = f"{heat * (1 + HEAT_NOISE * rng.standard_normal()):.3f}"

    table = io.StringIO()
    writer = csv.writer(table, lineterminator="\n")
    writer.writerow(["run", *row])
    writer.writerow(["bench", *row.values()])
    truth = {
        "seed": SEED,
        "tip": "convective",
        "h": {"value": COEFFICIENT, "unit": "W/(m^2 K)"},
        "k": {"value": CONDUCTIVITY, "unit": "W/(m K)"},
        "joint": {"value": resistance, "unit": "m^2 K/W"},
        "plate": {"value": PLATE, "unit": "degC"},
        "air": {"value": AIR, "unit": "degC"},
        "base_temperature": {
            "value": round(float(solution.base_temperature[0]) - ZERO_CELSIUS, 4),
            "unit": "degC",
        },
        "heat": {"value": round(heat, 5), "unit": "W"},
    }
    return {"readings.csv": table.getvalue(), "truth.json": json.dumps(truth, indent=2) + "\n"}


if __name__ == "__main__":
    datasets = Path(__file__).parents[2] / "datasets"
    for name in RESISTANCES:
        for file_name, text in make(name).items():
            (datasets / name / file_name).write_text(text, encoding="utf-8")
