"""Derived quantities against the definitions, written out for a pin."""

import math

import numpy as np
import pytest
from rigs import TRUTH, Truth, exact_readings, pin_rig

from finback import derived, posing
from finback.problem import Candidate, Problem
from finback.quantity import Quantity

D, LENGTH = 0.008, 0.120
JOINTED = Candidate("convective", joint=True, joint_possible=True)


def problem(**changes: object) -> Problem:
    rig = pin_rig(**changes)
    return posing.pose(rig, exact_readings(rig), JOINTED)


def at_truth(posed: Problem) -> np.ndarray:
    values = {"h": TRUTH.h, "k": TRUTH.k, "joint": TRUTH.joint, "plate": TRUTH.plate, "air": TRUTH.air}
    return np.array(
        [math.log(values[p.name]) if p.transform == "log" else values[p.name] for p in posed.parameters]
    )


def test_values_are_those_of_their_definitions() -> None:
    posed = problem()
    found = {name: float(v[0]) for name, v in derived.evaluate(posed, at_truth(posed)[None]).items()}
    heat = exact_readings(posed.rig).values["Q"]
    base = float(TRUTH.solve(posed.rig, np.zeros(1)).base_temperature[0])
    excess, area = base - TRUTH.air, math.pi / 4 * D**2
    surface = math.pi * D * LENGTH + area  # a convective tip face counts
    assert found["h_over_k"] == pytest.approx(45 / 167)
    assert found["m"] == pytest.approx(math.sqrt(45 * 4 / (167 * D)))
    assert found["joint_times_k"] == pytest.approx(5e-5 * 167)
    assert found["base_temperature"] == pytest.approx(base)
    assert found["heat"] == pytest.approx(heat)
    assert found["heat"] == pytest.approx(area * (TRUTH.plate - base) / 5e-5)
    assert found["base_heat_flux"] == pytest.approx(heat / area)
    assert found["efficiency"] == pytest.approx(heat / (45 * surface * excess))
    assert found["effectiveness"] == pytest.approx(heat / (45 * area * excess))
    assert found["transverse_biot"] == pytest.approx(45 * D / 4 / 167)
    assert {"h", "k", "joint", "plate", "air"} <= set(found)


def test_without_a_joint_there_is_no_product_with_it() -> None:
    rig = pin_rig(places=("air",))
    posed = posing.pose(rig, exact_readings(rig, Truth(joint=None)), Candidate("adiabatic", False, False))
    found = derived.evaluate(posed, posed.prior_mean[None])
    assert "joint" not in found
    assert "joint_times_k" not in found


def test_a_block_is_evaluated_row_by_row_and_exact_values_are_spread() -> None:
    posed = problem(conductivity=Quantity(167.0))
    z = at_truth(posed)
    block = np.array([z, z + 0.01, z - 0.02])
    together = derived.evaluate(posed, block)
    for name, values in together.items():
        assert values.shape == (3,), name
        for row, value in zip(block, values, strict=True):
            assert derived.evaluate(posed, row[None])[name][0] == pytest.approx(value, rel=1e-12)
    assert set(together["k"]) == {167.0}


def test_gradients_are_derivatives() -> None:
    posed = problem()
    z = at_truth(posed)
    found = derived.gradients(posed, z)
    h, k, joint = (posed.names.index(name) for name in ("h", "k", "joint"))
    assert found["h_over_k"][h] == pytest.approx(45 / 167, rel=1e-6)  # of a logarithm: the value itself
    assert found["h_over_k"][k] == pytest.approx(-45 / 167, rel=1e-6)
    assert found["m"][h] == pytest.approx(0.5 * math.sqrt(45 * 4 / (167 * D)), rel=1e-6)
    assert found["joint_times_k"][joint] == pytest.approx(5e-5 * 167, rel=1e-6)
    for name, gradient in found.items():
        move = np.array([1e-3, -2e-3, 1e-3, 0.05, -0.03])
        up, down = (float(derived.evaluate(posed, (z + s * move)[None])[name][0]) for s in (1, -1))
        assert gradient @ move == pytest.approx((up - down) / 2, rel=1e-3, abs=1e-12), name


def test_temperatures_are_reported_in_degrees_celsius() -> None:
    assert derived.reported("base_temperature", np.array([300.0]))[0] == pytest.approx(26.85)
    assert derived.reported("heat", np.array([300.0]))[0] == 300.0
