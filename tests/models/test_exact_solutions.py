"""Fins against solutions of 40 digits, found by two independent routes: data/exact_solutions.json.

Each case is solved by what `solve` chooses, a closed form, and by the general solution at two orders; an
infinite fin by the former alone.
"""

import json
from functools import partial
from pathlib import Path

import numpy as np
import pytest

from finback.models import (
    AdiabaticTip,
    Annular,
    BaseTemperature,
    ConcaveParabolic,
    Cone,
    ConvectiveTip,
    ConvexParabolic,
    ConvexPin,
    Fin,
    FixedTip,
    InfiniteTip,
    Joint,
    Triangular,
    Uniform,
    UniformCoefficient,
    bessel_forms,
    closed_form,
    efficiency,
    general,
    pin,
    rectangular,
    solve,
)

DATA = json.loads((Path(__file__).parent / "data" / "exact_solutions.json").read_text(encoding="utf-8"))
CASES = {case["id"]: case for case in DATA["cases"]}
ENDLESS = [id_ for id_ in CASES if "infinite" in id_]
TOLERANCE = 1e-10
AIR = 293.15
LONG = 0.3  # m; an infinite fin goes on whatever its length

STRAIGHT = {
    "triangular": Triangular,
    "triangular_area_conventions": Triangular,
    "concave_parabolic": ConcaveParabolic,
    "convex_parabolic": ConvexParabolic,
}
ROUND = {"pin_conical": Cone, "pin_convex_parabolic": ConvexPin}


def profile(case_id, length=None):
    inputs = CASES[case_id]["inputs"]
    length = length or inputs.get("L_m", LONG)
    if "r1_m" in inputs:
        return Annular(2 * inputs["r1_m"], 2 * inputs["r2_m"], inputs["delta_m"])
    if "D_b_m" in inputs:
        return ROUND.get(case_id, pin)(length, inputs["D_b_m"])
    shape = STRAIGHT.get(case_id, rectangular)
    return shape(length, width=1.0, thickness=inputs["delta_b_m"], guarded_edges=True)


def end_conditions(case_id):
    inputs = CASES[case_id]["inputs"]
    wall = AIR + inputs["theta_b_K"]
    convective = {"rect_convective_tip", "rect_corrected_length_vs_exact", "pin_cyl_convective"}
    if case_id in convective | {"annular_rect_convective", "annular_corrected_radius"}:
        tip = ConvectiveTip()
    elif case_id == "rect_fixed_tip":
        tip = FixedTip(AIR + inputs["theta_L_over_theta_b"] * inputs["theta_b_K"])
    else:
        tip = InfiniteTip() if case_id in ENDLESS else AdiabaticTip()
    base = Joint(wall, inputs["Rc_m2K_W"]) if "Rc_m2K_W" in inputs else BaseTemperature(wall)
    return tip, base


def computed(case_id, solver, names):
    inputs = CASES[case_id]["inputs"]
    tip, base = end_conditions(case_id)
    fin = Fin(profile(case_id), inputs["k_W_mK"], UniformCoefficient(inputs["h_W_m2K"]), tip)
    length = fin.profile.length
    solution = solver(fin, base, AIR, np.array([0.0]))

    def excess_ratio(temperature):
        return (float(temperature[0]) - AIR) / inputs["theta_b_K"]

    def excess_ratio_at(x):
        return excess_ratio(solver(fin, base, AIR, np.array([x])).temperatures[:, 0])

    def heat_of(other):
        longer = Fin(other, fin.conductivity, fin.surface, AdiabaticTip())
        return solver(longer, base, AIR, np.array([0.0])).base_heat[0]

    def corrected():
        if "r1_m" not in inputs:
            return heat_of(profile(case_id, length + inputs["delta_b_m"] / 2))
        return heat_of(Annular(2 * inputs["r1_m"], 2 * inputs["r2_m"] + inputs["delta_m"], inputs["delta_m"]))

    def efficiency_on(area):
        return heat_of(fin.profile) / (inputs["h_W_m2K"] * area * inputs["theta_b_K"])

    def corrected_ring():
        rim = inputs["r2_m"] + inputs["delta_m"] / 2
        return corrected() / (
            inputs["h_W_m2K"] * inputs["theta_b_K"] * 2 * np.pi * (rim**2 - inputs["r1_m"] ** 2)
        )

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
        "theta_ratio_at_r_0.0195_m": lambda: excess_ratio_at(0.0195 - inputs["r1_m"]),
        "theta_ratio_at_r_0.0265_m": lambda: excess_ratio_at(0.0265 - inputs["r1_m"]),
        "theta_ratio_tip": lambda: excess_ratio(solution.tip_temperature),
        "theta_root_over_theta_wall": lambda: excess_ratio(solution.base_temperature),
        "theta_tip_over_theta_wall": lambda: excess_ratio(solution.tip_temperature),
        "eta": lambda: efficiency(fin, solution, AIR)[0],
        "eta_on_slant_area": lambda: efficiency_on(2 * np.hypot(length, inputs["delta_b_m"] / 2)),
        "eta_on_2pi(r2c^2-r1^2)": corrected_ring,
        "q_base_W": lambda: solution.base_heat[0],
        "q_base_W_per_m": lambda: solution.base_heat[0],
        "q_exact_W_per_m": lambda: solution.base_heat[0],
        "q_exact_W": lambda: solution.base_heat[0],
        "q_W": corrected,
        "q_corrected_length_W_per_m": corrected,
        "q_out_through_tip_W_per_m": lambda: solution.tip_heat[0],
        "relative_error": lambda: corrected() / solution.base_heat[0] - 1,
    }
    return {name: float(quantities[name]()) for name in names}


def assert_agrees(case_id, solver, tolerance):
    expected = {name: float(value) for name, value in CASES[case_id]["values"].items()}
    actual = computed(case_id, solver, expected)
    small = expected.pop("relative_error", None)
    if small is not None:  # a difference of two heats: as exact as they are, not as itself
        assert actual.pop("relative_error") == pytest.approx(small, rel=0, abs=tolerance * 1e-3)
    assert actual == pytest.approx(expected, rel=tolerance, abs=0)


@pytest.mark.parametrize("case_id", CASES)
def test_closed_forms_agree_to_ten_digits(case_id):
    fin = Fin(profile(case_id), 1.0, UniformCoefficient(1.0), AdiabaticTip())
    chosen = closed_form if isinstance(fin.profile, Uniform) else bessel_forms
    assert chosen.applies(fin)
    assert_agrees(case_id, chosen.solve, TOLERANCE)
    assert_agrees(case_id, solve, TOLERANCE)


@pytest.mark.parametrize(("accuracy", "tolerance"), [(2e-6, 2e-6), (general.ACCURACY, 1e-9), (1e-11, 1e-10)])
@pytest.mark.parametrize("case_id", [id_ for id_ in CASES if id_ not in ENDLESS])
def test_the_general_solution_agrees_to_what_is_asked(case_id, accuracy, tolerance):
    assert_agrees(case_id, partial(general.solve, accuracy=accuracy), tolerance)
