"""Sensors: a straight line from raw counts to a value, and what is known of its errors."""

from __future__ import annotations

from typing import Annotated, Literal

from annotated_types import Ge, Gt, Le

from ..units import Current, Pressure, Time, Voltage
from .toml_file import Table

_Counts = Annotated[int, Ge(0), Le(65535)]
_Watch = Annotated[Time, Ge(0.0), Le(60.0)]


class Sensor(Table):
    """Parts that every sensor has.

    `stuck`: longest time without one count of change; left out, it is worked out from the noise
    (0 = not watched). `lag` is the first-order time constant of sensor and filter.
    """

    counts_low: _Counts
    counts_high: _Counts
    counts_full: Annotated[int, Ge(1), Le(65535)]
    lag: Annotated[Time, Ge(0.0), Le(1.0)] = 0.0
    stuck: _Watch | None = None


class PressureSensor(Sensor):
    """Gauge pressure. `uncertainty` is standard (k = 1), of one calibrated reading."""

    kind: Literal["pressure"] = "pressure"
    low: Annotated[Pressure, Ge(-1e6), Le(1e6)]
    high: Annotated[Pressure, Ge(-1e6), Le(1e6)]
    noise: Annotated[Pressure, Ge(0.0), Le(1e5)] = 0.0
    uncertainty: Annotated[Pressure, Ge(0.0), Le(1e5)] = 0.0
    jump: Annotated[Pressure, Gt(0.0), Le(1e6)] | None = None


class CurrentSensor(Sensor):
    """Current through one coil."""

    kind: Literal["current"] = "current"
    low: Annotated[Current, Ge(-32.0), Le(32.0)]
    high: Annotated[Current, Ge(-32.0), Le(32.0)]
    noise: Annotated[Current, Ge(0.0), Le(10.0)] = 0.0
    uncertainty: Annotated[Current, Ge(0.0), Le(10.0)] = 0.0
    jump: Annotated[Current, Gt(0.0), Le(64.0)] | None = None


class VoltageSensor(Sensor):
    """Supply voltage at the driver."""

    kind: Literal["voltage"] = "voltage"
    low: Annotated[Voltage, Ge(-100.0), Le(100.0)]
    high: Annotated[Voltage, Ge(-100.0), Le(100.0)]
    noise: Annotated[Voltage, Ge(0.0), Le(10.0)] = 0.0
    uncertainty: Annotated[Voltage, Ge(0.0), Le(10.0)] = 0.0
    jump: Annotated[Voltage, Gt(0.0), Le(100.0)] | None = None


class Sensors(Table):
    """By channel. Chamber, outlet and coil_a are needed; the others when they are wired."""

    chamber: PressureSensor
    outlet: PressureSensor
    inlet: PressureSensor | None = None
    coil_a: CurrentSensor
    coil_b: CurrentSensor | None = None
    supply: VoltageSensor | None = None
