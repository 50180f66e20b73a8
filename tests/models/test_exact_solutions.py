"""Uniform fins against solutions of 40 digits, found by two independent routes: data/exact_solutions.json."""

import json
from pathlib import Path

import numpy as np
import pytest

from finback.models import (
    AdiabaticTip,
    BaseTemperature,
    ConvectiveTip,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    UniformCoefficient,
    efficiency,
    pin,
    rectangular,
    solve,
)

DATA = json.loads((Path(__file__).parent / "data" / "exact_solutions.json").read_text(encoding="utf-8"))
CASES = {case["id"]: case for case in DATA["cases"]}
TOLERANCE = 1e-10
AIR = 293.15
LONG = 0.3  # m; an infinite fin goes on whatever its length


def profile(inputs, length):
    if "D_b_m" in inputs:
        return pin(length, inputs["D_b_m"])
    return rectangular(length, width=1.0, thickness=inputs["delta_b_m"], guarded_edges=True)


def end_conditions(case_id, inputs):
    wall = AIR + inputs["theta_b_K"]
    tip = {
        "rect_adiabatic": AdiabaticTip(),
        "rect_convective_tip": ConvectiveTip(),
        "rect_corrected_length_vs_exact": ConvectiveTip(),
        "rect_fixed_tip": FixedTip(AIR + inputs.get("theta_L_over_theta_b", 0.0) * inputs["theta_b_K"]),
        "rect_infinite": InfiniteTip(),
        "rect_contact_base": AdiabaticTip(),
        "pin_cyl_adiabatic": AdiabaticTip(),
        "pin_cyl_convective": ConvectiveTip(),
    }[case_id]
    base = Joint(wall, inputs["Rc_m2K_W"]) if "Rc_m2K_W" in inputs else BaseTemperature(wall)
    return tip, base


def computed(case_id, names):
    inputs = CASES[case_id]["inputs"]
    length = inputs.get("L_m", LONG)
    tip, base = end_conditions(case_id, inputs)
    fin = Fin(profile(inputs, length), inputs["k_W_mK"], UniformCoefficient(inputs["h_W_m2K"]), tip)
    solution = solve(fin, base, AIR, np.array([0.0]))

    def excess_ratio(temperature):
        return (float(temperature[0]) - AIR) / inputs["theta_b_K"]

    def excess_ratio_at(x):
        return excess_ratio(solve(fin, base, AIR, np.array([x])).temperatures[:, 0])

    def corrected_length():
        longer = Fin(
            profile(inputs, length + inputs["delta_b_m"] / 2), fin.conductivity, fin.surface, AdiabaticTip()
        )
        return solve(longer, base, AIR, np.array([0.0])).base_heat[0]

    def fin_parameter():
        endless = Fin(fin.profile, fin.conductivity, fin.surface, InfiniteTip())
        heat = solve(endless, BaseTemperature(AIR + 1.0), AIR, np.array([0.0])).base_heat[0]
        return heat / (fin.conductivity * fin.profile.area(np.zeros(1))[0])

    quantities = {
        "m": fin_parameter,
        "mL": lambda: fin_parameter() * length,
        "theta_ratio_at_x_over_L_0.4": lambda: excess_ratio_at(0.4 * length),
        "theta_ratio_at_x_over_L_0.8": lambda: excess_ratio_at(0.8 * length),
        "theta_ratio_at_x_0.02_m": lambda: excess_ratio_at(0.02),
        "theta_ratio_at_x_0.06_m": lambda: excess_ratio_at(0.06),
        "theta_ratio_tip": lambda: excess_ratio(solution.tip_temperature),
        "theta_root_over_theta_wall": lambda: excess_ratio(solution.base_temperature),
        "theta_tip_over_theta_wall": lambda: excess_ratio(solution.tip_temperature),
        "eta": lambda: efficiency(fin, solution, AIR)[0],
        "q_base_W": lambda: solution.base_heat[0],
        "q_base_W_per_m": lambda: solution.base_heat[0],
        "q_exact_W_per_m": lambda: solution.base_heat[0],
        "q_corrected_length_W_per_m": corrected_length,
        "q_out_through_tip_W_per_m": lambda: solution.tip_heat[0],
        "relative_error": lambda: corrected_length() / solution.base_heat[0] - 1,
    }
    return {name: float(quantities[name]()) for name in names}


@pytest.mark.parametrize("case_id", CASES)
def test_agrees_to_ten_digits(case_id):
    expected = {name: float(value) for name, value in CASES[case_id]["values"].items()}
    actual = computed(case_id, expected)
    small = expected.pop("relative_error", None)
    if small is not None:  # a difference of two heats: as exact as they are, not as itself
        assert actual.pop("relative_error") == pytest.approx(small, rel=0, abs=TOLERANCE * 1e-3)
    assert actual == pytest.approx(expected, rel=TOLERANCE, abs=0)
