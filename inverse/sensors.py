"""Sensors: what a rig reads, where, and how well; and what is assumed where the rig is silent about that."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Literal

from finback.entries import Spread
from finback.errors import InputError
from finback.findings import Finding
from finback.quantity import Quantity
from finback.thermocouples import ThermocoupleClass
from finback.wording import listed, quoted

if TYPE_CHECKING:
    from finback.rig_file import SensorSection, SensorsSection

SensorPlace = Literal["fin", "plate", "air", "heat", "heater"]

HEAT_NOISE = 0.05
"""Noise of a heat reading where the rig states none, as a fraction of the reading: a choice of ours."""

LONGEST_NAME = 64
RUN_COLUMN = "run"
"""The column of a table of readings that names the runs, and so the name of no sensor."""

_SLACK = 1e-9  # of the length: a sensor at the very tip may be written in another unit than the fin


@dataclass(frozen=True, slots=True)
class Sensor:
    """One sensor of a rig, in SI units.

    `place`: what it reads. `position` [m] from the base, fin sensors only, with its standard uncertainty
    `position_sd` [m]. `noise`: standard deviation from reading to reading, K for temperatures and W for heat,
    None when it is to be estimated from the readings; `calibration`: standard uncertainty of the error common
    to all sensors of this place. Where either was given in per cent of the reading, `noise_relative` or
    `calibration_relative` holds the fraction and the absolute one is None or 0; `calibration_class` is a
    thermocouple's, where that was given. `calibration_at` knows all three.
    """

    name: str
    place: SensorPlace
    position: float | None = None
    position_sd: float = 0.0
    noise: float | None = None
    noise_relative: float | None = None
    calibration: float = 0.0
    calibration_relative: float | None = None
    calibration_class: ThermocoupleClass | None = None

    @property
    def reads_temperature(self) -> bool:
        """Whether it reads a temperature rather than a heat flow."""
        return self.place in ("fin", "plate", "air")

    @property
    def exactly_known(self) -> bool:
        """Whether what it reads is the true value: a noise of zero is stated, and no calibration error."""
        return self.noise == 0 and self.calibration == 0 and self.calibration_class is None

    def calibration_at(self, value: float) -> float:
        """Return the standard uncertainty [K or W] of the common error where it reads a value [K or W]."""
        if self.calibration_class is not None:
            return self.calibration_class.standard_uncertainty(value)
        if self.calibration_relative is not None:
            return self.calibration_relative * abs(value)
        return self.calibration


def place_sensors(section: SensorsSection, length: Quantity, source: Path | None) -> dict[str, Sensor]:
    """Return the sensors of a rig by name, with the defaults filled in where they apply.

    Arguments: section, the checked table [sensors]; length of the fin [m]; source, for errors.
    Raises InputError for a sensor without a place, in two places, or beyond the fin.
    """
    entries: Mapping[str, SensorSection] = section.__pydantic_extra__ or {}
    sensors = {}
    for name, entry in entries.items():
        _check_name(name, source)
        _check_place(name, entry, length, source)
        sensors[name] = _sensor(name, entry, section, length)
    if not any(sensor.place == "fin" for sensor in sensors.values()):
        remedy = 'add a line for each, such as T1 = { at = "5 mm" }'
        raise InputError(source, "[sensors]", "there is no sensor in the fin", remedy)
    return sensors


def assumed(section: SensorsSection, sensors: Mapping[str, Sensor]) -> Iterator[Finding]:
    """Yield a finding for each default that was used because the rig says nothing of it."""
    entries: Mapping[str, SensorSection] = section.__pydantic_extra__ or {}
    defaults = section.defaults
    unstated = [
        name
        for name, entry in entries.items()
        if entry.calibration is None
        and not (sensors[name].reads_temperature and (defaults.calibration or sensors[name].exactly_known))
    ]
    if unstated:
        yield _finding(
            f"No calibration uncertainty is stated for {listed(unstated)}: it is taken as zero; state it "
            'with calibration = "0.3 K" in [sensors.defaults], for heat with calibration = "2 %".',
            "calibration",
            0.0,
        )
    for kind in dict.fromkeys(sensor.calibration_class for sensor in sensors.values()):
        if kind is not None:
            message = (
                f"{quoted(kind.name)} is taken as an even spread within {kind.words} ({kind.standard}, "
                f"{kind.range}), and as one error of all sensors that read the same; the instrument's own "
                "error is not in it."
            )
            yield Finding("assumed", "note", message, evidence={"key": "calibration", "value": kind.name})
    unplaced = [
        name
        for name, entry in entries.items()
        if entry.at
        and entry.position is None
        and not entry.at.states_uncertainty
        and defaults.position is None
    ]
    if unplaced:
        yield _finding(
            f"No uncertainty of the position is stated for {listed(unplaced)}: it is taken as zero; state it "
            'with position = "0.5 mm" in [sensors.defaults].',
            "position",
            0.0,
        )
    noisy = [
        name for name, entry in entries.items() if not sensors[name].reads_temperature and entry.noise is None
    ]
    if noisy:
        yield _finding(
            f"No noise is stated for {listed(noisy)}: it is taken as {100 * HEAT_NOISE:g} % of the reading; "
            'state it with noise = "3 %" at the sensor.',
            "noise",
            HEAT_NOISE,
        )
    if not any(sensor.place == "air" for sensor in sensors.values()):
        yield Finding(
            "assumed",
            "note",
            "No sensor reads the air: its temperature is left free within a wide prior; add a sensor such as "
            'TA = { on = "air" }.',
            evidence={"key": "air"},
        )


def _finding(message: str, key: str, value: float) -> Finding:
    return Finding("assumed", "note", message, evidence={"key": key, "value": value})


def _check_name(name: str, source: Path | None) -> None:
    if not name.strip() or name != name.strip() or len(name) > LONGEST_NAME or not name.isprintable():
        remedy = f"write 1 to {LONGEST_NAME} printable characters without blanks around them"
        raise InputError(source, "[sensors]", f"{quoted(name)} is no name for a sensor", remedy)
    if name == RUN_COLUMN:
        problem = f'"{RUN_COLUMN}" is the column that names the runs, and no name for a sensor'
        raise InputError(source, "[sensors]", problem, "give the sensor another name")


def _check_place(name: str, entry: SensorSection, length: Quantity, source: Path | None) -> None:
    shown = name if name.isidentifier() else quoted(name)
    place = f"[sensors] {shown}"
    if entry.at is None and entry.on is None:
        remedy = 'write at = "5 mm" for a sensor in the fin, or on = "plate", "air", "heat" or "heater"'
        raise InputError(source, place, "it is not said what this sensor reads", remedy)
    if entry.at is not None and entry.on is not None:
        problem = f'this sensor is both in the fin ("at") and on "{entry.on}"'
        raise InputError(source, place, problem, "leave one of the two out")
    if entry.position is not None and entry.at is None:
        problem = "only a sensor in the fin has a position"
        raise InputError(source, f"{place} position", problem, "leave position out")
    if entry.at is None:
        return
    if entry.position is not None and entry.at.states_uncertainty:
        problem = 'the uncertainty of the position stands both here and in "at"'
        raise InputError(source, f"{place} position", problem, "leave one of the two out")
    if entry.at.value > length.value * (1 + _SLACK):
        problem = f"{quoted(entry.at.text)} is beyond the fin, whose length is {quoted(length.text)}"
        raise InputError(
            source, f"{place} at", problem, "write the distance from the base, at most the length"
        )


def _sensor(name: str, entry: SensorSection, section: SensorsSection, length: Quantity) -> Sensor:
    defaults = section.defaults
    place: SensorPlace = entry.on or "fin"
    temperature = place in ("fin", "plate", "air")
    noise, relative_noise = entry.noise[:2] if entry.noise else (None, False)
    if entry.noise is None and temperature and defaults.noise is not None:
        noise = defaults.noise.amount
    if entry.noise is None and not temperature:
        noise, relative_noise = HEAT_NOISE, True
    calibration = entry.calibration or Spread(0.0, False)
    exact = (
        entry.noise is not None and entry.noise.amount == 0
    )  # then a default does not speak of this sensor
    if entry.calibration is None and temperature and defaults.calibration is not None and not exact:
        calibration = defaults.calibration
    return Sensor(
        name,
        place,
        position=None if entry.at is None else min(entry.at.value, length.value),
        position_sd=_position_sd(entry, defaults.position),
        noise=None if relative_noise else noise,
        noise_relative=noise if relative_noise else None,
        calibration=0.0 if calibration.relative else calibration.amount,
        calibration_relative=calibration.amount if calibration.relative else None,
        calibration_class=calibration.thermocouple,
    )


def _position_sd(entry: SensorSection, default: Quantity | None) -> float:
    """Return the standard uncertainty of a sensor's position [m]: its own, or else the default's."""
    if entry.at is None:
        return 0.0
    if entry.position is not None:
        return entry.position.value
    if entry.at.states_uncertainty:
        return entry.at.sd
    return 0.0 if default is None else default.value
