"""What readings cannot tell is null, what they can tell is not: by the hundred, on rigs drawn at random.

Whether a rig can tell is known from how it was made: temperatures along a fin give h/k alone; a joint needs a
plate sensor and is then known by its product with k; a fin that is as warm everywhere as its thermometers can
see gives only a limit of h. All rigs are invented.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pytest
from rigs import ZERO, Truth, draw, pin_rig

from finback import posing, routes, summaries
from finback.problem import Candidate
from finback.quantity import Quantity
from finback.rig import Rig

ALONG = np.linspace(0.05, 0.95, 7)  # of the length
NOISE = 0.1  # K
EACH = 100


@dataclass(frozen=True)
class Case:
    """A rig, its truth, and the quantities that readings cannot tell (or all that they can)."""

    rig: Rig
    truth: Truth
    judged: tuple[str, ...]


def truth(rng: np.random.Generator) -> tuple[Truth, float, float]:
    """Draw a pin that falls notably along its length: truth, length and diameter [m]."""
    k = float(np.exp(rng.uniform(np.log(15), np.log(390))))
    diameter, length = rng.uniform(0.004, 0.015), rng.uniform(0.05, 0.2)
    h = k * diameter / 4 * (rng.uniform(0.6, 2.0) / length) ** 2
    air = ZERO + rng.uniform(15, 30)
    # a joint across which some tenths of the excess temperature fall
    conductance = k * rng.uniform(0.6, 2.0) / length
    return Truth(h, k, rng.uniform(0.1, 0.4) / conductance, air + rng.uniform(40, 90), air), length, diameter


def stubby(rng: np.random.Generator) -> tuple[Truth, float, float]:
    """Draw a short pin of good metal, along which less falls than a twentieth to a half of the noise."""
    h, k, diameter = rng.uniform(5, 30), rng.uniform(150, 390), rng.uniform(0.008, 0.015)
    air = ZERO + rng.uniform(15, 30)
    excess = rng.uniform(40, 90)
    fall = NOISE * rng.uniform(0.05, 0.5)
    length = np.sqrt(2 * fall / excess * k * diameter / (4 * h))
    return Truth(h, k, None, air + excess, air), float(length), diameter


def made(rng: np.random.Generator, kind: str) -> Case:
    """Draw a case of a kind."""
    true, length, diameter = stubby(rng) if kind == "nothing falls" else truth(rng)
    known = Quantity(true.k, 0.05 * true.k)
    k, places, judged = {
        "temperatures alone": (None, ("air",), ("h", "k", "heat")),
        "a plate, and no heat": (None, ("plate", "air"), ("h", "k", "joint", "heat")),
        "a heater that only bounds": (None, ("plate", "air", "heater"), ("h", "k", "joint")),
        "nothing falls": (known, ("air",), ("h", "h_over_k")),
        "no plate": (None, ("air", "heat"), ("joint", "joint_times_k")),
        "k stated": (known, ("air",), ("h", "k", "h_over_k", "heat")),
        "heat read": (None, ("air", "heat"), ("h", "k", "h_over_k", "heat")),
        "a plate and k": (known, ("plate", "air"), ("h", "joint", "h_over_k")),
        "a plate and heat": (None, ("plate", "air", "heat"), ("h", "k", "joint", "h_over_k")),
        "all of it": (known, ("plate", "air", "heat"), ("h", "k", "joint", "h_over_k", "heat")),
    }[kind]
    rig = pin_rig(
        holes=tuple(ALONG * length), places=places, noise=NOISE, calibration=0.05, position_sd=1e-4,
        length=length, diameter=diameter, conductivity=k,
    )  # fmt: skip
    return Case(rig, true if "plate" in places else Truth(true.h, true.k, None, true.plate, true.air), judged)


NULL = (
    "temperatures alone",
    "a plate, and no heat",
    "a heater that only bounds",
    "nothing falls",
    "no plate",
)
TOLD = ("k stated", "heat read", "a plate and k", "a plate and heat", "all of it")


def judgements(kind: str, count: int) -> Iterator[tuple[str, bool]]:
    """Yield each judged quantity with whether it is reported, over rigs drawn at random."""
    for number in range(count):
        rng = np.random.default_rng([41, NULL.index(kind) if kind in NULL else 10 + TOLD.index(kind), number])
        case = made(rng, kind)
        power = 1.5 * float(case.truth.solve(case.rig, np.zeros(1)).base_heat[0])
        readings, _ = draw(case.rig, case.truth, rng, power)
        plate = any(sensor.place == "plate" for sensor in case.rig.sensors.values())
        problem = posing.pose(case.rig, readings, Candidate("convective", plate, plate))
        route = routes.weigh(problem, np.random.SeedSequence(number))
        judge = summaries.judge(route.outcome())
        for name in case.judged:
            if name not in route.quantities and name not in problem.fixed:
                yield name, False  # such as a joint without a plate: there is no such unknown
                continue
            yield name, judge.summarise(name, route.quantities[name]).median is not None


@pytest.mark.parametrize("kind", NULL)
@pytest.mark.parametrize("count", [8, pytest.param(EACH, marks=pytest.mark.slow)])
def test_what_readings_cannot_tell_is_null(kind: str, count: int) -> None:
    reported = [name for name, told in judgements(kind, count) if told]
    assert reported == []


@pytest.mark.parametrize("kind", TOLD)
@pytest.mark.parametrize("count", [8, pytest.param(EACH, marks=pytest.mark.slow)])
def test_what_readings_can_tell_is_reported(kind: str, count: int) -> None:
    told = [told for _, told in judgements(kind, count)]
    assert np.mean(told) >= 0.99


def test_there_are_five_hundred_of_each() -> None:
    assert len(NULL) * EACH == len(TOLD) * EACH == 500
