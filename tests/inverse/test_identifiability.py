"""What is determined, by what: on linear information made by hand, and on rigs that can tell this or that."""

import numpy as np
import pytest
from rigs import Truth, exact_readings, pin_rig

from finback import derived, optimum, posing
from finback.identifiability import Information, information
from finback.problem import Candidate
from finback.quantity import Quantity

WIDE = np.array([1.0, 1.0])
FIRST, SECOND = np.array([1.0, 0.0]), np.array([0.0, 1.0])
RATIO, PRODUCT = np.array([1.0, -1.0]), np.array([1.0, 1.0])


def told(readings: np.ndarray, stated: tuple[float, float] = (0.0, 0.0)) -> Information:
    return Information(np.asarray(readings, dtype=float), np.array(stated), WIDE)


def test_variance_is_that_of_the_sum_of_all_information() -> None:
    readings = np.array([[5.0, 2.0], [2.0, 3.0]])
    found = told(readings, (7.0, 0.0))
    expected = np.linalg.inv(readings + np.diag([8.0, 1.0]))
    for gradient in (FIRST, SECOND, RATIO):
        assert found.variance(gradient) == pytest.approx(gradient @ expected @ gradient)
    assert found.variance(FIRST, readings=False, stated=False) == pytest.approx(1.0)


def test_a_ratio_is_determined_and_its_parts_are_not() -> None:
    found = told(1e4 * np.outer(RATIO, RATIO))
    assert found.determines(RATIO)
    assert found.source(RATIO) == "readings"
    for gradient in (FIRST, SECOND, PRODUCT):
        assert not found.determines(gradient)


def test_a_statement_parts_what_the_readings_leave_together() -> None:
    found = told(1e4 * np.outer(RATIO, RATIO), (0.0, 400.0))
    for gradient in (FIRST, SECOND, RATIO, PRODUCT):
        assert found.determines(gradient)
    assert found.source(RATIO) == "readings"
    assert found.source(SECOND) == "prior"
    assert found.source(FIRST) == "both"  # the readings' ratio times the stated value


def test_two_equal_sources_are_both() -> None:
    assert told(np.diag([400.0, 400.0]), (400.0, 0.0)).source(FIRST) == "both"
    assert told(np.diag([400.0, 400.0]), (20.0, 0.0)).source(FIRST) == "readings"
    assert told(np.diag([20.0, 400.0]), (400.0, 0.0)).source(FIRST) == "prior"


@pytest.mark.parametrize(("precision", "determined"), [(0.5, False), (3.0, False), (5.0, True), (1e6, True)])
def test_weak_readings_do_not_determine(precision: float, determined: bool) -> None:
    # a fifth of the information may come from nowhere
    assert told(np.diag([precision, 0.0])).determines(FIRST) is determined


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e6])
def test_the_size_of_a_combination_does_not_matter(scale: float) -> None:
    found = told(1e4 * np.outer(RATIO, RATIO), (0.0, 400.0))
    for gradient in (FIRST, SECOND, RATIO):
        assert found.determines(scale * gradient) == found.determines(gradient)
        assert found.source(scale * gradient) == found.source(gradient)


ALL = {"h", "k", "joint", "h_over_k", "joint_times_k", "base_temperature", "heat", "efficiency"}
STATED_K = Quantity(167.0, 8.35)
TELLS = {
    "fin and air": ({"places": ("air",)}, {"h_over_k", "base_temperature", "efficiency"}),
    "fin, air, heat": ({"places": ("air", "heat")}, ALL - {"joint", "joint_times_k"}),
    "fin, air, k": ({"places": ("air",), "conductivity": STATED_K}, ALL - {"joint", "joint_times_k"}),
    "fin, air, plate": ({"places": ("air", "plate")}, ALL - {"h", "k", "joint", "heat"}),
    "fin, air, plate, heat": ({"places": ("air", "plate", "heat")}, ALL),
    "fin, air, plate, k": ({"places": ("air", "plate"), "conductivity": STATED_K}, ALL),
}


@pytest.mark.parametrize("name", TELLS)
def test_what_a_rig_can_tell(name: str) -> None:
    options, expected = TELLS[name]
    rig = pin_rig(**options)
    reads_plate = "plate" in options["places"]
    candidate = Candidate("convective", joint=reads_plate, joint_possible=reads_plate)
    truth = Truth() if reads_plate else Truth(joint=None)
    point = optimum.fit(posing.pose(rig, exact_readings(rig, truth), candidate))
    found = information(point.problem, point.z, point.sigma)
    slopes = derived.gradients(point.problem, point.z)
    assert {q for q in ALL & set(slopes) if found.determines(slopes[q])} == expected


def test_a_heater_alone_does_not_part_h_from_k() -> None:
    rig = pin_rig(places=("air", "heater"))
    readings = exact_readings(rig, Truth(joint=None), power=20.0)
    point = optimum.fit(posing.pose(rig, readings, Candidate("convective", False, False)))
    found = information(point.problem, point.z, point.sigma)
    assert not found.determines(derived.gradients(point.problem, point.z)["h"])


def test_information_is_the_inverse_covariance_of_least_squares() -> None:
    rig = pin_rig()
    point = optimum.fit(posing.pose(rig, exact_readings(rig), Candidate("convective", True, True)))
    found = information(point.problem, point.z, point.sigma)
    scale = np.sqrt(np.diag(point.point.covariance))
    expected = point.point.covariance / np.outer(scale, scale)
    inverse = np.linalg.inv(found.readings * np.outer(scale, scale))
    np.testing.assert_allclose(inverse, expected, rtol=1e-4, atol=1e-9)
    assert not found.stated.any()
