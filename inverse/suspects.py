"""Suspects: what may be wrong with a measurement or a fin, how often that is so, and by how much.

Odds and sizes are common practice, choices of ours without a source: they stand here, in one table, so that
they can be read, reported and argued with. A fault has a size: an offset that is no larger than the noise is
no fault, so sizes are spread by factors about what is met on rigs and not about zero.
"""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from finback.rig import Rig, Sensor

Array = NDArray[np.float64]
Kind = Literal[
    "offset",
    "shift",
    "swap",
    "air",
    "heat",
    "joint",
    "k",
    "h",
    "emissivity",
    "tip",
    "misfit",
    "scatter",
    "more",
]

CODES: Mapping[Kind, str] = {
    "offset": "sensor-outlier",
    "shift": "position-shift",
    "swap": "sensor-swap",
    "air": "air-reference",
    "heat": "heat-balance",
    "joint": "joint",
    "k": "low-conductivity",
    "h": "low-convection",
    "emissivity": "low-convection",
    "tip": "misfit",
    "misfit": "misfit",
    "scatter": "misfit",
    "more": "healthy",
}
"""The finding that speaks of each kind: a fin that radiates less than it should is one that the air cools
less, one whose tip is not as drawn is one that no model of the rig fits, and one with more convection than is
expected of it is healthy."""

ODDS: Mapping[Kind, float] = {
    "offset": 0.12,
    "shift": 0.10,
    "swap": 0.08,
    "air": 0.10,
    "heat": 0.10,
    "joint": 0.12,
    "k": 0.10,
    "h": 0.12,
    "emissivity": 0.04,
    "tip": 0.02,
    "misfit": 0.02,
    "scatter": 0.05,
    "more": 0.10,
}
"""Of each kind against nothing wrong at all, before the readings. The odds of a kind are shared out over the
sensors that it may concern."""

NEIGHBOURS = 0.8
"""Of all swaps, those of two sensors that lie side by side."""

OFFSET, OFFSET_FACTOR = 2.0, 2.0  # K; a probe of another type, a bad junction or reference
SHIFT, SHIFT_FACTOR = 3e-3, 1.6  # m; a hole at the wrong mark
LARGEST_SHIFT = 0.1  # of the fin's length: what a shift is at the median on a short fin
AIR, AIR_FACTOR = 2.0, 1.7  # K; read where the fin's air is not, or in the sun of the fin
HEAT, HEAT_FACTOR = 0.15, 1.6  # of the reading; leads, insulation, the back of the heater
LOST = 0.9  # of wrong heats, those that read more than goes into the fin

SCATTER, SCATTER_FACTOR = 3.0, 1.8  # times what is stated of a fin's thermometers, where that is too little

CHANGES: Mapping[str, tuple[float, float]] = {
    "joint": (math.log(5.0), math.log(1.7)),
    "k": (math.log(0.75), 0.10),
    "h": (math.log(0.70), 0.12),
    "emissivity": (-1.5, 0.7),
    "more": (math.log(1.4), 0.25),
}
"""What a cause does to the coordinate of its parameter: by how much it moves, and the spread of that. A joint
that lost its grease or its pressure has some five times its resistance; the wrong alloy conducts a quarter
less; dirt or a failing fan takes a third of h; a bright surface radiates a quarter of a dark one. Convection
that is expected too low is so by some tens of per cent, and may be by a factor of two."""

OF_THE_FIN: tuple[Kind, ...] = ("joint", "k", "h", "emissivity", "tip")
"""Kinds that make a fin do less, and not only its thermometers say so."""

SPREAD = np.array([-2.0, -1.0, 0.0, 1.0, 2.0])  # of the logarithm of a size, in its standard deviations


@dataclass(frozen=True, slots=True)
class Size:
    """How large a fault of a reading is [K, W]: normal distributions side by side.

    `shares`, `means`, `sds`, shape (c,) each; the shares add up to one.
    """

    shares: Array
    means: Array
    sds: Array

    def scaled(self, factor: float) -> "Size":
        """Return the sizes times a factor."""
        return Size(self.shares, self.means * factor, self.sds * abs(factor))


@dataclass(frozen=True, slots=True, eq=False)
class Suspect:
    """One thing that may be wrong.

    `kind`; `sensor` it concerns, None for a cause in the fin; `other`, the sensor that it is swapped with, or
    the tip that the fin has in truth; `odds` against nothing wrong; `size` of what it adds to the reading of
    its sensor [K, W], of a shift [m], None for others.
    """

    kind: Kind
    odds: float
    sensor: str | None = None
    other: str | None = None
    size: Size | None = None

    @property
    def code(self) -> str:
        """The code of the finding that names it."""
        return CODES[self.kind]

    @property
    def of_the_fin(self) -> bool:
        """Whether the fin itself does less for it."""
        return self.kind in OF_THE_FIN


def about(median: float, factor: float, positive: float = 0.5) -> Size:
    """Return sizes spread about a median by a factor (one standard deviation), to both sides.

    `positive`: the share of those above zero.
    """
    width = math.log(factor)
    shares = np.exp(-0.5 * np.square(SPREAD))
    shares /= shares.sum()
    means = median * np.exp(width * SPREAD)
    sds = 0.5 * width * means
    both = np.concatenate([positive * shares, (1 - positive) * shares])
    return Size(both, np.concatenate([means, -means]), np.concatenate([sds, sds]))


def of_readings(rig: Rig, read: Sequence[Sensor], heats: Mapping[str, float]) -> Iterator[Suspect]:
    """Yield what may be wrong with the readings of a run.

    Arguments: rig; read, the sensors whose readings have an error; heats, what those that read a heat say
    [W].
    """
    temperatures = [sensor for sensor in read if sensor.place in ("fin", "plate")]
    fin = sorted((s for s in read if s.place == "fin"), key=lambda s: s.position or 0.0)
    airs = [sensor for sensor in read if sensor.place == "air"]
    for sensor in temperatures:
        odds = ODDS["offset"] / len(temperatures)
        yield Suspect("offset", odds, sensor.name, size=about(OFFSET, OFFSET_FACTOR))
    median = min(SHIFT, LARGEST_SHIFT * rig.length)
    for sensor in fin:
        yield Suspect("shift", ODDS["shift"] / len(fin), sensor.name, size=about(median, SHIFT_FACTOR))
    pairs = list(combinations(range(len(fin)), 2))
    beside = sum(b - a == 1 for a, b in pairs)
    for a, b in pairs:
        share = NEIGHBOURS / beside if b - a == 1 else (1 - NEIGHBOURS) / (len(pairs) - beside)
        yield Suspect("swap", ODDS["swap"] * share, fin[a].name, fin[b].name)
    for sensor in airs:
        yield Suspect("air", ODDS["air"] / len(airs), sensor.name, size=about(AIR, AIR_FACTOR))
    for name, heat in heats.items():
        size = about(HEAT, HEAT_FACTOR, LOST).scaled(abs(heat))
        yield Suspect("heat", ODDS["heat"] / len(heats), name, size=size)
