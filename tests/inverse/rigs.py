"""Invented rigs with a known truth, and readings computed from it by the forward model.

Nothing here is a measurement. Readings come straight from `finback.models`, not through `Rig.build` or
`Problem`, so that a test of those does not compare a thing with itself. What a rig states of its errors is
drawn as it would happen on a bench: noise for each reading, one offset for each place, a misplacement for
each hole, the fin's lengths, and the conductivity where the rig states one.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from finback.models import (
    AdiabaticTip,
    Annular,
    BaseTemperature,
    ConcaveParabolic,
    ConcavePin,
    Cone,
    ConvectiveTip,
    ConvexParabolic,
    ConvexPin,
    Fin,
    FixedTip,
    HyperbolicAnnular,
    InfiniteTip,
    Joint,
    LinearConductivity,
    PowerCoefficient,
    Radiating,
    Solution,
    SurfaceLaw,
    Table,
    Trapezoidal,
    Triangular,
    UniformCoefficient,
    VaryingCoefficient,
    pin,
    rectangular,
    solve,
)
from finback.quantity import Quantity
from finback.readings import Readings
from finback.rig import Rig, Sensor, TipName

ZERO = 273.15
REFERENCE = 40.0  # K, the excess temperature that h belongs to where it follows that
T0 = 293.15  # K, the temperature that k belongs to where it follows that
HOLES = tuple(1e-3 * x for x in (5, 20, 35, 50, 65, 80, 95, 112))  # m
UNSTATED_NOISE = 0.15  # K
SHAPES = {
    "pin": pin,
    "rectangular": rectangular,
    "trapezoidal": Trapezoidal,
    "triangular": Triangular,
    "concave-parabolic": ConcaveParabolic,
    "convex-parabolic": ConvexParabolic,
    "cone": Cone,
    "concave-pin": ConcavePin,
    "convex-pin": ConvexPin,
    "annular": Annular,
    "hyperbolic-annular": HyperbolicAnnular,
}


@dataclass(frozen=True)
class Truth:
    """What is true of an invented rig, SI units; joint 0 is a perfect one, None means that there is none."""

    h: float = 45.0
    k: float = 167.0
    joint: float | None = 5e-5
    plate: float = ZERO + 80.0
    air: float = ZERO + 22.0
    tip: TipName = "convective"
    tip_temperature: float = ZERO + 30.0
    lengths: Mapping[str, float] = field(default_factory=dict)  # those that differ from what the rig states
    table: tuple[Sequence[float], ...] = ()  # positions [m], areas [m²], perimeters [m] of such a profile
    exponent: float | None = None  # of h ∝ θⁿ, h being that at an excess of REFERENCE
    rise: float | None = None  # of h from base to tip, over its mean
    emissivity: float | None = None
    surroundings: float | None = None  # the air's temperature where it is left out
    coefficient: float = 0.0  # b of k(T) = k (1 + b (T - T0)) [1/K]
    fins: int = 1
    bare_area: float = 0.0
    loss: float = 0.0

    @property
    def surface(self) -> SurfaceLaw:
        """The law of the side."""
        law: SurfaceLaw = UniformCoefficient(self.h)
        if self.exponent is not None:
            law = PowerCoefficient(self.h, self.exponent, REFERENCE)
        if self.rise is not None:
            law = VaryingCoefficient(self.h, self.rise)
        return law if self.emissivity is None else Radiating(law, self.emissivity, self.surroundings)

    def solve(self, rig: Rig, x: np.ndarray) -> Solution:
        """Solve the true fin at positions x [m]."""
        sizes = {name: q.value for name, q in rig.geometry.items()} | dict(self.lengths)
        tips = {
            "adiabatic": AdiabaticTip(),
            "convective": ConvectiveTip(),
            "infinite": InfiniteTip(),
            "fixed": FixedTip(self.tip_temperature),
        }
        shape = Table(*self.table) if self.table else SHAPES[rig.profile_name](**sizes)
        k = LinearConductivity(self.k, T0, self.coefficient) if self.coefficient else self.k
        fin = Fin(shape, k, self.surface, tips[self.tip])
        base = BaseTemperature(self.plate) if self.joint is None else Joint(self.plate, self.joint)
        return solve(fin, base, self.air, x)


TRUTH = Truth()


def pin_rig(
    *,
    holes: tuple[float, ...] = HOLES,
    places: tuple[str, ...] = ("plate", "air", "heat"),
    noise: float | None = 0.15,
    calibration: float = 0.1,
    position_sd: float = 0.3e-3,
    length: float = 0.120,
    diameter: Quantity | float = 0.008,
    heat_noise: float = 0.03,
    **others: object,
) -> Rig:
    """Return an invented pin, thermocouples in holes [m] and sensors on places; others are fields of Rig."""
    sensors = [
        Sensor(f"T{i}", "fin", x, position_sd, noise, None, calibration) for i, x in enumerate(holes, start=1)
    ]
    names = {"plate": "TP", "air": "TA", "heat": "Q", "heater": "PH"}
    for place in places:
        if place in ("plate", "air"):
            sensors.append(Sensor(names[place], place, noise=noise, calibration=calibration))
        else:
            sensors.append(Sensor(names[place], place, noise_relative=heat_noise))
    across = diameter if isinstance(diameter, Quantity) else Quantity(diameter)
    sizes = {"length": Quantity(length), "diameter": across}
    return Rig("an invented pin", "pin", sizes, {s.name: s for s in sensors}, **others)


def exact_readings(rig: Rig, truth: Truth = TRUTH, power: float | None = None) -> Readings:
    """Return what error-free sensors would read; power [W] is a heater's, the heat if left out."""
    return _read(rig, truth, {}, power)


def draw(
    rig: Rig, truth: Truth, rng: np.random.Generator, power: float | None = None
) -> tuple[Readings, Truth]:
    """Return readings with every error that the rig states drawn once, and the truth behind them.

    A stated conductivity scatters about the truth, so the truth that belongs to it scatters about the
    statement; a noise that the rig leaves out is 0.15 K.
    """
    truth = replace(truth, lengths={name: rng.normal(q.value, q.sd) for name, q in rig.geometry.items()})
    if rig.conductivity is not None and rig.conductivity.sd > 0:
        width = np.sqrt(np.log1p((rig.conductivity.sd / rig.conductivity.value) ** 2))
        truth = replace(truth, k=float(rig.conductivity.value * np.exp(width * rng.standard_normal())))
    holes = {s.name: s.position + rng.normal(0.0, s.position_sd) for s in rig.fin_sensors()}
    exact = _read(rig, truth, holes, power)
    shared = {place: rng.standard_normal() for place in ("fin", "plate", "air", "heat", "heater")}
    values = {}
    for name, value in exact.values.items():
        sensor = rig.sensors[name]
        own = (sensor.noise or 0.0) + (sensor.noise_relative or 0.0) * abs(value)
        if sensor.noise is None and sensor.noise_relative is None:
            own = UNSTATED_NOISE
        common = sensor.calibration + (sensor.calibration_relative or 0.0) * abs(value)
        values[name] = float(value + own * rng.standard_normal() + common * shared[sensor.place])
    return Readings("drawn", values), truth


def _read(rig: Rig, truth: Truth, holes: Mapping[str, float], power: float | None) -> Readings:
    fin = rig.fin_sensors()
    x = np.array([holes.get(s.name, s.position) for s in fin])
    solution = truth.solve(rig, x)
    values = dict(zip((s.name for s in fin), solution.temperatures[0].tolist(), strict=True))
    heat = truth.fins * float(solution.base_heat[0])
    bare = truth.bare_area * float(truth.surface.flux(np.array([truth.plate]), truth.air)[0])
    total = heat + bare + truth.loss
    others = {"plate": truth.plate, "air": truth.air, "heat": heat, "heater": power or total}
    values |= {s.name: others[s.place] for s in rig.sensors.values() if s.place != "fin"}
    return Readings("exact", {name: values[name] for name in rig.sensors})
