"""Recover the truth of synthetic runs of every profile and every surface law; print as JSON what came of it.

Run `python tests/quality/recovery_study.py cone 0 100` for the first hundred runs of an invented cone. The
true candidate is posed, so that what is tested is its posterior, by the fast route. Every error that the rig
states is drawn anew for each run, and so is what is known of a law beforehand (exponent, rise, emissivity),
from its prior.
"""

import json
import sys
import tempfile
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "inverse"))

from rigs import REFERENCE, ZERO, Truth, draw

from finback import geometry, posing, routes
from finback.parameters import default, stated
from finback.problem import Candidate
from finback.quantity import Quantity
from finback.rig import Rig

STRAIGHT = {"length": "60 mm", "width": "80 mm", "thickness": "3 mm +/- 0.03 mm", "edges": "exposed"}
PIN = {"length": "90 mm", "diameter": "8 mm +/- 0.05 mm"}
RING = {"inner_diameter": "25 mm", "outer_diameter": "75 mm +/- 0.1 mm", "thickness": "1.5 mm"}
PROFILES = {
    "pin": PIN,
    "rectangular": STRAIGHT,
    "trapezoidal": STRAIGHT | {"tip_thickness": "1 mm +/- 0.03 mm"},
    "triangular": STRAIGHT,
    "concave-parabolic": STRAIGHT,
    "convex-parabolic": STRAIGHT,
    "cone": PIN | {"tip_diameter": "3 mm"},
    "concave-pin": PIN,
    "convex-pin": PIN,
    "annular": RING,
    "hyperbolic-annular": RING,
    "table": {"file": "shape.csv"},
}
TABLE = "x [mm],area [mm^2],perimeter [mm]\n0,60,28\n40,45,25\n40,40,24\n90,20,17\n"
SHARP = ("triangular", "concave-parabolic", "convex-parabolic", "concave-pin", "convex-pin")
LAWS = {
    "free-convection": {"candidates": {"surface_laws": ["free-convection"]}},
    "varying": {"candidates": {"surface_laws": ["varying"]}},
    "radiating": {"candidates": {"surface_laws": ["radiating"]}},
    "known emissivity": {"material": {"emissivity": "0.85 +/- 0.05"}},
}
"""The pin with each law; a uniform h is what the profiles have."""
ALONG = (0.05, 0.2, 0.35, 0.5, 0.65, 0.8, 0.95)  # of the length


def invented(name: str) -> Rig:
    """Return the invented rig of a profile, or of a pin with a surface law."""
    profile = name if name in PROFILES else "pin"
    with tempfile.NamedTemporaryFile("w", suffix=".csv") as shape:
        shape.write(TABLE)
        shape.flush()
        sizes = {key: shape.name if key == "file" else size for key, size in PROFILES[profile].items()}
        fin = {"profile": profile, **sizes, "tip": "adiabatic" if name in SHARP else "convective"}
        length = Rig.from_dict({"fin": fin, "sensors": {"T": {"at": "0 mm"}}}).length
        sensors = {f"T{i}": {"at": f"{1e3 * x * length:.5g} mm"} for i, x in enumerate(ALONG, start=1)}
        sensors |= {"TP": {"on": "plate"}, "TA": {"on": "air"}}
        sensors["Q"] = {"on": "heat", "noise": "3 %", "calibration": "1 %"}
        sensors["defaults"] = {"noise": "0.1 K", "calibration": "0.1 K", "position": "0.3 mm"}
        document = {"fin": fin, "material": {"conductivity": "167 W/(m K) +/- 5 %"}, "sensors": sensors}
        for table, keys in LAWS.get(name, {}).items():
            document[table] = document.get(table, {}) | keys
        return Rig.from_dict(document)


def drawn_law(name: str, random: np.random.Generator) -> dict[str, float]:
    """Draw what a law knows beforehand, and give it a hot plate."""
    known = {"free-convection": "exponent", "varying": "rise", "radiating": "emissivity"}
    if name in PROFILES:
        return {}
    parameter = default(known[name]) if name in known else stated("emissivity", Quantity(0.85, 0.05))
    value = parameter.values(random.normal(parameter.prior.mean, parameter.prior.sd))
    return {"h": 9.0, "plate": ZERO + 110.0, parameter.name: float(value)}


def repeat(name: str, rig: Rig, number: int) -> dict[str, list[float]]:
    """Recover one run: truth and 95 % interval of each quantity."""
    random = np.random.default_rng([11, number])
    table = ()
    if rig.shape_file is not None:
        columns = np.genfromtxt(TABLE.splitlines(), delimiter=",", skip_header=1).T
        table = tuple((columns * np.array([[1e-3], [1e-6], [1e-3]])).tolist())
    law = drawn_law(name, random)
    readings, truth = draw(rig, Truth(tip=rig.tip, table=table, **law), random)
    candidate = Candidate(rig.tip, True, True, rig.laws[0] if rig.laws else "uniform")
    route = routes.weigh(posing.pose(rig, readings, candidate), np.random.SeedSequence(number))
    problem, posterior = route.point.problem, route.fast
    values = geometry.spread(problem, route.mode.z, posterior.z, route.quantities, random)
    solution = truth.solve(rig, np.zeros(1))
    h = truth.h
    if truth.exponent is not None:
        h *= (posing.reference_excess(rig, readings) / REFERENCE) ** truth.exponent
    true = {
        "h": h,
        "k": truth.k,
        "joint": truth.joint,
        "h_over_k": h / truth.k,
    }
    true |= {each: value for each, value in law.items() if each not in ("h", "plate")}
    true |= {"heat": float(solution.base_heat[0]), "base_temperature": float(solution.base_temperature[0])}
    found = {}
    for quantity, value in true.items():
        low, high = posterior.quantiles(values[quantity], (0.025, 0.975))
        found[quantity] = [value, float(low), float(high)]
    return found


if __name__ == "__main__":
    studied, first, last = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    described = invented(studied)
    json.dump([repeat(studied, described, number) for number in range(first, last)], sys.stdout)
