"""Checks of a run against its rig before anything is computed: can it be fitted at all."""

from collections.abc import Sequence

from finback.errors import InputError
from finback.handbook import REACH
from finback.readings import Readings
from finback.rig import Rig, Sensor
from finback.wording import quoted

SMALLEST_EXCESS = 0.1
"""Excess temperature [K] below which a fin tells nothing, however good its thermometers are."""

NOISES = 3.0
"""How many times the noise of its thermometers the excess temperature of a fin must be [1]."""


def check_run(rig: Rig, readings: Readings) -> None:
    """Check the readings of one run against its rig.

    Raises InputError for a reading that belongs to no sensor, a temperature that is not above 0 K, a heat of
    zero whose noise is a share of it, a fin as warm as the air, and fewer readings than unknowns.
    """
    for name in readings.values:
        if name not in rig.sensors:
            problem, remedy = f"the rig has no sensor {quoted(name)}", "add it, or leave its reading out"
            raise _error(readings, problem, remedy)
    used = readings.used
    read = [sensor for name, sensor in rig.sensors.items() if name in used]
    for sensor in read:
        _check_value(sensor, readings)
    _check_excess(read, readings)
    _check_conducting(rig, read, readings)
    _check_number(rig, read, readings)


def _error(readings: Readings, problem: str, remedy: str) -> InputError:
    return InputError(readings.source, f"run {quoted(readings.run)}", problem, remedy)


def _check_value(sensor: Sensor, readings: Readings) -> None:
    value = readings.values[sensor.name]
    if sensor.reads_temperature and not value > 0:
        problem = f"{quoted(sensor.name)} reads {value:g} K, which no temperature is"
        raise _error(readings, problem, "give temperatures in kelvin, above zero")
    if value == 0 and sensor.noise_relative is not None:
        problem = f"{quoted(sensor.name)} reads 0 W, of which a noise in per cent is no noise at all"
        raise _error(readings, problem, 'state its noise in the rig as an amount, such as noise = "0.1 W"')


def _check_excess(read: Sequence[Sensor], readings: Readings) -> None:
    """Check that the fin is warmer or colder than the air, by more than its thermometers scatter."""
    air = [readings.values[sensor.name] for sensor in read if sensor.place == "air"]
    fin = [sensor for sensor in read if sensor.place == "fin"]
    if not fin:
        raise _error(readings, "no temperature along the fin was read", "read at least one, better five")
    if not air:
        return
    mean_air = sum(air) / len(air)
    excess = max(abs(readings.values[sensor.name] - mean_air) for sensor in fin)
    needed = max(SMALLEST_EXCESS, NOISES * max(sensor.noise or 0.0 for sensor in fin))
    if excess < needed:
        problem = f"no temperature along the fin is further than {excess:.2g} K from the air"
        raise _error(readings, problem, f"heat or cool the fin, by {needed:.2g} K at the very least")


def _check_conducting(rig: Rig, read: Sequence[Sensor], readings: Readings) -> None:
    """Check that a stated change of the conductivity leaves a possible one at every temperature read."""
    change = rig.change
    temperatures = [readings.values[sensor.name] for sensor in read if sensor.place in ("fin", "plate")]
    if change is None or not temperatures:
        return
    worst = max(temperatures, key=lambda t: abs(change.coefficient * (t - change.reference)))
    share = 1 + change.coefficient * (worst - change.reference)
    if abs(share - 1) > REACH:
        problem = f"the conductivity would be {share:.2g} times the stated one at {worst - 273.15:.0f} °C"
        remedy = "check temperature_coefficient in [material], a relative change a kelvin"
        raise _error(readings, problem, remedy)


def _check_number(rig: Rig, read: Sequence[Sensor], readings: Readings) -> None:
    """Check that there are at least as many readings as unknowns, what is exactly known being neither."""
    known = {sensor.place for sensor in read if sensor.place in ("plate", "air") and sensor.exactly_known}
    bounds = [sensor for sensor in read if sensor.place == "heater" and not rig.losses_stated]
    counted = [sensor for sensor in read if sensor not in bounds and sensor.place not in known]
    places = {sensor.place for sensor in read}
    heat = any(map(rig.tells_heat, places))
    unknowns = ["h" if rig.conductivity is not None or heat else "h/k"]
    if "plate" not in known:
        unknowns.append("plate temperature" if "plate" in places else "base temperature")
    if "plate" in places:
        unknowns.append("joint")
    if rig.conductivity is None and heat:
        unknowns.append("k")
    if "air" not in known and (rig.surroundings.air is None or "air" in places):
        unknowns.append("air temperature")
    if rig.tip == "fixed" and rig.tip_temperature is None:
        unknowns.append("tip temperature")
    if any(sensor.noise is None and sensor.noise_relative is None for sensor in counted):
        unknowns.append("noise")
    if len(counted) < len(unknowns):
        number = f"{len(counted)} reading{'s' * (len(counted) != 1)}"
        problem = f"{number} cannot determine {len(unknowns)} unknowns ({', '.join(unknowns)})"
        raise _error(readings, problem, "read more sensors, or state more in the rig")
