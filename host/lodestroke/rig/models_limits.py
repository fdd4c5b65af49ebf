"""Limits: what the board watches, what holds the stroke back (soft) and what trips (hard)."""

from __future__ import annotations

from typing import Annotated

from annotated_types import Ge, Gt, Le

from ..units import Current, Pressure, Ratio, Temperature, Time, Voltage
from .toml_file import Table

_High = Annotated[Pressure, Gt(0.0), Le(1e6)]
_Low = Annotated[Pressure, Ge(-1e6), Le(1e6)]
_Heat = Annotated[Temperature, Gt(-40.0), Le(250.0)]


class HighPressure(Table):
    """Soft and hard level, gauge."""

    soft: _High
    hard: _High


class LowPressure(Table):
    """Soft and hard level, gauge, usually below zero."""

    soft: _Low
    hard: _Low


class HeatLimit(Table):
    """Soft and hard level of the winding's estimated temperature."""

    soft: _Heat
    hard: _Heat


class Limits(Table):
    """Every bound of a rig. What is left out takes the default that `check` prints."""

    outlet_reverse: HighPressure       # outlet less chamber: across the outlet valve, backwards
    inlet_reverse: HighPressure        # chamber less inlet: across the inlet valve, backwards
    chamber_high: HighPressure
    chamber_low: LowPressure
    outlet_high: HighPressure
    outlet_low: _Low
    current: Annotated[Current, Gt(0.0), Le(30.0)]
    over_current: Annotated[Current, Gt(0.0), Le(32.0)]
    coil_temperature: HeatLimit
    duty_cycle: Annotated[Ratio, Ge(0.01), Le(1.0)] = 0.6
    host_silence: Annotated[Time, Ge(0.3), Le(600.0)] = 5.0
    tick_late: Annotated[Time, Ge(0.001), Le(0.5)] = 0.05
    fold_floor: Annotated[Ratio, Ge(0.0), Le(1.0)] = 0.5
    fold_fall: Annotated[Time, Ge(0.001), Le(10.0)] = 0.01
    fold_rise: Annotated[Time, Ge(0.001), Le(10.0)] = 0.25
    stop_ramp: Annotated[Time, Ge(0.001), Le(2.0)] = 0.05
    sensor_bad: Annotated[Time, Ge(0.0), Le(1.0)] = 0.003
    coil_open_current: Annotated[Current, Ge(0.0), Le(10.0)] | None = None
    coil_open_time: Annotated[Time, Ge(0.001), Le(10.0)] = 0.05
    supply_low: Annotated[Voltage, Ge(0.0), Le(60.0)] | None = None
    deadman: bool | None = None        # None: needed on real boards
    tail: Annotated[Time, Ge(0.0), Le(0.5)] = 0.25
