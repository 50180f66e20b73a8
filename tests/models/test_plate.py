"""The balance of a plate: what each part is, and that heat goes in and out."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from finback.models import (
    ConvectiveTip,
    Fin,
    Joint,
    Plate,
    PowerCoefficient,
    Radiating,
    UniformCoefficient,
    heat_of_one_fin,
    heat_parts,
    pin,
    plate_heat,
    solve,
)
from finback.models.constants import STEFAN_BOLTZMANN

AIR, HOT = 295.0, 355.0
PARTS = ("fins", "bare_convective", "bare_radiative", "loss")
numbers = st.floats(0.0, 100.0)


def test_each_part_by_hand():
    plate = Plate(24, 0.011, Radiating(UniformCoefficient(12.0), 0.2, 285.0), loss=1.5)
    heat = plate_heat(plate, 2.25, HOT, AIR)
    assert heat.fins.tolist() == [54.0]
    assert heat.bare_convective[0] == pytest.approx(12.0 * 0.011 * 60.0, rel=1e-12)
    assert heat.bare_radiative[0] == pytest.approx(
        0.2 * STEFAN_BOLTZMANN * 0.011 * (HOT**4 - 285.0**4), rel=1e-12
    )
    assert heat.loss.tolist() == [1.5]


@given(fins=st.integers(1, 100), area=numbers, h=numbers, loss=numbers, each=numbers, hot=st.floats(200, 600))
def test_the_parts_make_the_whole_and_the_way_back(fins, area, h, loss, each, hot):
    plate = Plate(fins, area, Radiating(PowerCoefficient(h, 0.25, 30.0), 0.5), loss)
    heat = plate_heat(plate, each, hot, AIR)
    total = sum(getattr(heat, name)[0] for name in PARTS)
    size = sum(abs(getattr(heat, name)[0]) for name in PARTS)
    assert heat.total[0] == pytest.approx(total, rel=0, abs=1e-12 * size)
    assert heat_of_one_fin(plate, heat.total, hot, AIR)[0] == pytest.approx(each, rel=0, abs=1e-12 * size)


def test_a_plate_without_bare_area_gives_all_to_its_fins():
    for plate in (Plate(7), Plate(7, 0.0, UniformCoefficient(30.0)), Plate(7, 0.02)):
        heat = plate_heat(plate, 3.0, HOT, AIR)
        assert heat.total.tolist() == heat.fins.tolist() == [21.0]


def test_a_heater_without_a_stated_loss_is_an_upper_bound():
    stated, unstated = (Plate(10, 0.01, UniformCoefficient(8.0), loss) for loss in (4.0, 0.0))
    power = 60.0
    assert heat_of_one_fin(stated, power, HOT, AIR)[0] < heat_of_one_fin(unstated, power, HOT, AIR)[0]


def test_a_plate_and_its_fins_hang_together():
    """The plate drives fins behind joints: its heater gives what all surfaces and the loss take."""
    n = 5
    rng = np.random.default_rng(7)
    h, air, hot = rng.uniform(5, 30, n), rng.uniform(285, 300, n), rng.uniform(330, 380, n)
    law = Radiating(PowerCoefficient(h, 0.25, 40.0), 0.6)
    fin = Fin(pin(0.08, 0.008), 167.0, law, ConvectiveTip())
    solution = solve(fin, Joint(hot, 1e-4), air, np.array([]))
    plate = Plate(24, 0.011, law, loss=rng.uniform(0, 3, n))
    heat = plate_heat(plate, solution.base_heat, hot, air)
    parts = heat_parts(fin, solution)
    radiated = 24 * parts.radiative + heat.bare_radiative
    convected = 24 * parts.convective + heat.bare_convective
    assert heat.total == pytest.approx(radiated + convected + plate.loss, rel=1e-12)
    assert {getattr(heat, name).shape for name in (*PARTS, "total")} == {(n,)}


@pytest.mark.parametrize(
    "values", [(np.full(3, 2.0), HOT, AIR), (2.0, np.full(3, HOT), AIR), (2.0, HOT, np.full(3, AIR))]
)
def test_any_value_may_be_one_a_set(values):
    law = Radiating(UniformCoefficient(12.0), 0.2)
    for plate in (Plate(24, 0.011, law), Plate(24, 0.011, UniformCoefficient(np.full(3, 12.0)))):
        heat = plate_heat(plate, *values)
        one = plate_heat(
            Plate(24, 0.011, law if plate.surface == law else UniformCoefficient(12.0)), 2.0, HOT, AIR
        )
        for name in (*PARTS, "total"):
            assert getattr(heat, name).shape == (3,)
            assert getattr(heat, name) == pytest.approx(np.full(3, getattr(one, name)[0]), rel=1e-14)


@pytest.mark.parametrize(
    ("fins", "area", "complaint"),
    [
        (0, 0.1, r"^fins must be one or more, got 0$"),
        (np.nan, 0.1, r"^fins must be one or more, got nan$"),
        (3, -0.1, r"^bare_area must be finite and not negative, got -0\.1$"),
    ],
)
def test_a_plate_that_is_none_is_refused(fins, area, complaint):
    with pytest.raises(ValueError, match=complaint):
        Plate(fins, area)
