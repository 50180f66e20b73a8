"""Fins whose temperature passes one at which a law has a kink: known integrals, and where cells are put."""

from dataclasses import replace

import numpy as np
import pytest

from finback.models import (
    BaseTemperature,
    Fin,
    FixedTip,
    LinearConductivity,
    PowerCoefficient,
    Radiating,
    TabulatedConductivity,
    UniformCoefficient,
    VaryingCoefficient,
    kinks,
    nodes,
    pin,
    solve,
)

PIN = pin(length=0.08, diameter=0.006)
AIR, HOT, COLD = 295.0, 390.0, 255.0
TABLE = ((270.0, 110.0), (300.0, 130.0), (330.0, 120.0), (360.0, 150.0))
LAWS = {
    "n = 0.05": (120.0, PowerCoefficient(60.0, 0.05, 50.0)),
    "n = 1/4": (120.0, PowerCoefficient(60.0, 0.25, 50.0)),
    "n = 1": (120.0, PowerCoefficient(60.0, 1.0, 50.0)),
    "n = 1.9": (120.0, PowerCoefficient(60.0, 1.9, 50.0)),
    "steep": (20.0, PowerCoefficient(400.0, 0.3, 50.0)),
    "radiation": (120.0, Radiating(PowerCoefficient(40.0, 0.25, 50.0), 0.8, 280.0)),
    "k(T)": (LinearConductivity(120.0, 300.0, 2e-3), PowerCoefficient(60.0, 1 / 3, 50.0)),
    "table": (TabulatedConductivity(TABLE), UniformCoefficient(60.0)),
    "table and n = 1/4": (TabulatedConductivity(TABLE), PowerCoefficient(60.0, 0.25, 50.0)),
}


def known_fin(conductivity, law, heat_at_air):
    """Return length [m] and heats [W] at base and tip of a pin from HOT to COLD, by its first integral.

    Multiplied by the conducted heat Q, the fin equation integrates once: Q² = Q_air² + 2 P A times the
    integral of q k dT from the air's temperature, and the length is the integral of k A/Q dT. Q_air is the
    heat where the fin is as warm as the air.
    """
    area, perimeter = PIN.section_area, PIN.section_perimeter
    knots = np.array([point for point, _ in TABLE])

    def k(temperature):
        return conductivity if isinstance(conductivity, float) else conductivity.at(temperature)

    def integral(function, start, end):
        """Integrate from the air's temperature to another, close together towards it and parted at knots."""
        steps = start + (end - start) * np.concatenate([[0.0], 0.25 ** np.arange(20, -1, -1)])
        inside = knots[(knots > min(start, end)) & (knots < max(start, end))]
        edges = np.unique(np.concatenate([steps, inside]))
        x, weights = np.polynomial.legendre.leggauss(16)
        half = np.diff(edges)[:, None] / 2
        whole = np.sum(half * weights * function(edges[:-1, None] + half * (1 + x)))
        return whole if end > start else -whole

    def heat(temperature):
        work = integral(lambda at: law.flux(at, AIR) * k(at), AIR, temperature)
        return np.sqrt(heat_at_air**2 + 2 * perimeter * area * work)

    def gradient(temperatures):
        heats = np.array([heat(each) for each in temperatures.ravel()]).reshape(temperatures.shape)
        return k(temperatures) * area / heats

    return integral(gradient, AIR, HOT) - integral(gradient, AIR, COLD), heat(HOT), heat(COLD)


@pytest.mark.parametrize("heat_at_air", [0.3, 3.0])
@pytest.mark.parametrize("name", LAWS)
def test_heats_of_a_fin_that_passes_kinks_are_those_of_its_first_integral(name, heat_at_air):
    conductivity, law = LAWS[name]
    length, base_heat, tip_heat = known_fin(conductivity, law, heat_at_air)
    fin = Fin(replace(PIN, length=length), conductivity, law, FixedTip(COLD))
    solution = solve(fin, BaseTemperature(HOT), AIR, np.array([]))
    assert np.all(solution.converged)
    assert solution.base_heat[0] == pytest.approx(base_heat, rel=1e-8)
    assert solution.tip_heat[0] == pytest.approx(tip_heat, rel=0, abs=1e-8 * base_heat)


def test_cells_are_put_where_a_temperature_passes_a_level():
    fall = 400.0 - 100.0 * kinks.PLACES
    hump = 300.0 + 100.0 * kinks.PLACES * (1 - kinks.PLACES)
    found = list(kinks.cells(np.stack([fall, hump, fall - 50.0, fall], axis=1), (310.0,)))
    own = {tuple(rows.tolist()): np.array(ends) for ends, rows in found}
    assert set(own) == {(0, 3), (1,), (2,)}
    for rows, places in {
        (0, 3): [0.9],
        (1,): [0.5 - np.sqrt(0.15), 0.5 + np.sqrt(0.15)],
        (2,): [0.4],
    }.items():
        for place in places:
            below = np.searchsorted(own[rows], place)
            assert own[rows][below] - own[rows][below - 1] == pytest.approx(2 / kinks.CELLS)
    assert all(np.all((ends > 0) & (ends < 1)) for ends in own.values())


def test_a_tip_held_at_a_level_has_half_a_cell_and_none_is_put_elsewhere():
    fall = np.stack([400.0 - 100.0 * kinks.PLACES, 300.0 + 0 * kinks.PLACES], axis=1)
    ((ends, rows),) = kinks.cells(fall, (300.0,))
    assert rows.tolist() == [0]
    assert max(ends) == 1 - 1 / kinks.CELLS
    assert list(kinks.cells(fall, (299.0,))) == []


def test_what_passes_a_level():
    temperatures = np.array([[400.0, 310.0, 300.0, 300.0], [300.0, 300.0, 290.0, 300.0]])
    assert kinks.passed(temperatures, (305.0,), tip_held=False).tolist() == [True, True, False, False]
    assert kinks.passed(temperatures, (300.0,), tip_held=False).tolist() == [False] * 4
    assert kinks.passed(temperatures, (300.0,), tip_held=True).tolist() == [True, True, False, False]
    assert not kinks.passed(temperatures, (300.0 + 1e-5,), tip_held=False).any()
    assert kinks.passed(temperatures, (280.0, 395.0), tip_held=False).tolist() == [True, False, False, False]


def test_laws_tell_their_kinks():
    power = PowerCoefficient(10.0, 0.25, 50.0)
    assert power.kinks(AIR) == Radiating(power, 0.5, 280.0).kinks(AIR) == (AIR,)
    assert Radiating(UniformCoefficient(10.0), 0.5).kinks(AIR) == ()
    assert TabulatedConductivity(TABLE).kinks == (270.0, 300.0, 330.0, 360.0)
    assert not hasattr(VaryingCoefficient(10.0, 0.5), "kinks")


def test_fins_with_kinks_in_one_place_share_their_nodes(monkeypatch):
    """A block of fins that differ by little finds nodes for a few cells, not for each fin."""
    build, built = nodes._build, []
    monkeypatch.setattr(
        nodes, "_build", lambda shape, *rest: built.append(shape.cells) or build(shape, *rest)
    )
    fin = replace(PIN, length=0.0801)  # none that another test has solved
    coefficients = 60.0 * (1 + 1e-3 * np.linspace(-1, 1, 60))
    block, single = (
        solve(
            Fin(fin, 120.0, PowerCoefficient(h, 0.25, 50.0), FixedTip(COLD)),
            BaseTemperature(HOT),
            AIR,
            np.array([]),
        )
        for h in (coefficients, float(coefficients[7]))
    )
    assert np.all(block.converged)
    assert block.base_heat[7] == pytest.approx(single.base_heat[0], rel=1e-10)
    assert 1 <= len({cells for cells in built if cells}) <= 3
