"""A whole fit of each profile that is not uniform, on readings computed from a known truth.

Everything here is invented; the truth is what the readings were computed from, by `finback.models` alone.
"""

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from rigs import Truth, draw, exact_readings

import finback
from finback import posing
from finback import rig as rigs
from finback.candidates import enumerate_candidates
from finback.estimate import Estimate
from finback.models import efficiency
from finback.rig import Rig

STRAIGHT = {"length": "60 mm", "width": "80 mm", "thickness": "3 mm +/- 0.03 mm"}
PIN = {"length": "90 mm", "diameter": "8 mm +/- 0.05 mm"}
RING = {"inner_diameter": "25 mm", "outer_diameter": "75 mm +/- 0.1 mm", "thickness": "1.5 mm"}
PROFILES = {
    "trapezoidal": STRAIGHT | {"tip_thickness": "1 mm +/- 0.03 mm"},
    "triangular": STRAIGHT,
    "concave-parabolic": STRAIGHT,
    "convex-parabolic": STRAIGHT,
    "cone": PIN | {"tip_diameter": "3 mm"},
    "concave-pin": PIN,
    "convex-pin": PIN,
    "annular": RING,
    "hyperbolic-annular": RING,
}
SHARP = ("triangular", "concave-parabolic", "convex-parabolic", "concave-pin", "convex-pin")
JOINED = ("trapezoidal", "annular")  # behind a joint, the others at a base temperature
ALONG = (0.06, 0.21, 0.36, 0.52, 0.67, 0.82, 0.97)  # of the length


def rig(profile: str, fin: dict[str, str], joined: bool) -> Rig:
    length = Rig.from_dict({"fin": {"profile": profile, **fin}, "sensors": {"T": {"at": "0 mm"}}}).length
    sensors: dict[str, Any] = {
        f"T{n}": {"at": f"{1e3 * share * length:.4g} mm"} for n, share in enumerate(ALONG, start=1)
    }
    sensors |= {"TA": {"on": "air"}, "Q": {"on": "heat", "noise": "3 %", "calibration": "0 %"}}
    if joined:
        sensors["TP"] = {"on": "plate"}
    sensors["defaults"] = {"noise": "0.1 K", "calibration": "0.1 K", "position": "0.2 mm"}
    return Rig.from_dict(
        {
            "title": f"An invented fin, {profile}",
            "fin": {"profile": profile, **fin, "tip": "adiabatic" if profile in SHARP else "convective"},
            "material": {"conductivity": "167 W/(m K) +/- 5 %"},
            "sensors": sensors,
        }
    )


def assert_recovered(estimate: Estimate, found: Rig, truth: Truth) -> None:
    solution = truth.solve(found, np.zeros(1))
    true = {
        "h": truth.h,
        "k": truth.k,
        "h_over_k": truth.h / truth.k,
        "heat": float(solution.base_heat[0]),
        "base_temperature": float(solution.base_temperature[0]) - 273.15,
    }
    if truth.joint is not None:
        true["joint"] = truth.joint
    everything = {**estimate.parameters, **estimate.derived}
    for name, value in true.items():
        summary = everything[name]
        assert summary.median is not None, name
        assert summary.sd is not None
        assert abs(summary.median - value) < 3 * summary.sd, name
        assert summary.sd < 0.1 * value, name
    assert estimate.sampler.converged
    assert estimate.status == "ok"


@pytest.mark.parametrize("profile", PROFILES)
def test_a_fit_recovers_the_truth(profile: str) -> None:
    joined = profile in JOINED
    found = rig(profile, PROFILES[profile], joined)
    assert found.tip is not None
    truth = Truth(tip=found.tip, joint=5e-5 if joined else None)
    readings, true = draw(found, truth, np.random.default_rng(7))
    assert_recovered(finback.fit(found, readings, seed=1), found, true)


SHAFT = ((0.0, 0.05, 0.05, 0.1), (0.01, 0.01, 0.006, 0.006))  # positions, diameters [m]: invented


def test_a_fit_recovers_the_truth_of_a_table(tmp_path: Path) -> None:
    positions, diameters = (np.array(each) for each in SHAFT)
    columns = (positions, np.pi * diameters**2 / 4, np.pi * diameters)
    rows = "".join(f"{x},{a!r},{p!r}\n" for x, a, p in zip(*(c.tolist() for c in columns), strict=True))
    (tmp_path / "shape.csv").write_text(f"x [m],area [m^2],perimeter [m]\n{rows}", encoding="utf-8")
    found = rig("table", {"file": str(tmp_path / "shape.csv")}, joined=True)
    truth = Truth(table=tuple(each.tolist() for each in columns))
    readings, true = draw(found, truth, np.random.default_rng(7))
    estimate = finback.fit(found, readings, seed=1)
    assert_recovered(estimate, found, true)
    assert list(estimate.provenance.inputs) == ["shape.csv"]


def test_the_wrong_profile_is_noticed() -> None:
    truth = Truth(tip="adiabatic", joint=None)
    readings = exact_readings(rig("concave-pin", PIN, joined=False), truth)
    estimate = finback.fit(rig("convex-pin", PIN, joined=False), readings, seed=1)
    h = estimate.parameters["h"]
    assert "misfit" in {finding.code for finding in estimate.findings}
    # what fits nowhere but as a misfit of many per cent gives no number that would be wrong
    assert h.median is None or h.low95 <= truth.h <= h.high95
    plain = next(i for i, c in enumerate(estimate.candidates) if "misfit" not in c.name)
    assert estimate.candidates[plain].probability < 1e-3


def test_the_efficiency_of_a_triangular_fin_is_the_textbooks() -> None:
    # Incropera, 6th ed., Table 3.5: eta = I1(2 m L)/(m L I0(2 m L)), which is 0.6978 at m L = 1
    found = rig("triangular", STRAIGHT | {"edges": "guarded"}, joined=False)
    length, thickness, k = 0.06, 0.003, 167.0
    h = k * thickness / (2 * length**2)  # m L = 1 with m² = 2 h/(k t)
    fin, base, air = found.build({"h": h, "k": k, "air": 295.0, "base_temperature": 345.0}, "adiabatic")
    solution = finback.models.solve(fin, base, air, np.zeros(1))
    assert efficiency(fin, solution, air)[0] == pytest.approx(0.6978, abs=5e-5)


def test_a_sensor_at_the_very_tip_stands_a_length_that_is_uncertain() -> None:
    fin = {"profile": "cone", "length": "60 mm +/- 1 mm", "diameter": "6 mm"}
    sensors = {"T1": {"at": "5 mm"}, "T2": {"at": "60 mm"}, "TA": {"on": "air"}}
    found = Rig.from_dict({"fin": fin, "material": {"conductivity": "167 W/(m K) +/- 5 %"},
                           "sensors": sensors | {"defaults": {"noise": "0.1 K"}}})  # fmt: skip
    readings = exact_readings(found, Truth(tip="adiabatic", joint=None))
    (candidate,) = enumerate_candidates(found, readings)
    problem = posing.pose(found, readings, candidate)
    z = problem.prior_mean
    shorter = problem.predict(z[None], {"length": 0.0599})[0]
    assert np.isfinite(shorter).all()
    assert np.isfinite(posing.linearise(problem, z).noise.floor).all()


def test_a_rig_file_and_its_table_are_fitted_by_their_paths(tmp_path: Path) -> None:
    (tmp_path / "shape.csv").write_text(
        "x [mm];area [mm^2];perimeter [mm]\n0;50,3;25,13\n100;50,3;25,13\n", encoding="utf-8"
    )
    (tmp_path / "rig.toml").write_text(
        """
        [fin]
        profile = "table"
        file = "shape.csv"
        tip = "adiabatic"
        [material]
        name = "copper"
        [sensors]
        T1 = { at = "10 mm" }
        T2 = { at = "90 mm" }
        TA = { on = "air", noise = "0 K", calibration = "0 K" }
        [sensors.defaults]
        noise = "0.1 K"
        """,
        encoding="utf-8",
    )
    (tmp_path / "readings.csv").write_text("T1,T2,TA\n60,57,20\n", encoding="utf-8")
    estimate = finback.fit(tmp_path / "rig.toml", tmp_path / "readings.csv", seed=1)
    assert set(estimate.provenance.inputs) == {"rig.toml", "shape.csv", "readings.csv"}
    assert estimate.rig.length == rigs.read(tmp_path / "rig.toml").length == pytest.approx(0.1)
