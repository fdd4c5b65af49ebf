"""A rig as the board gets it: one flat array of integers in the order of lodeboard.limits.FIELDS.

Rounding happens here, once. Every value is held inside what a 32-bit board's small integer allows,
and so is every product that the tick will form with it.
"""

from __future__ import annotations

import binascii
import math
import struct

from lodeboard.limits import CHANNELS, FIELDS

from ..errors import RigError
from .coefficients import heat_values, regulator_values
from .models import Rig
from .models_sensors import Sensor
from .problems import key_text

SMALL = 1 << 30
_SPARE = 0.025           # readings may leave the calibrated span by this share
_STUCK_TICKS = 200       # with noise of half a count or more, no honest sensor stands still so long


def limits_blob(rig: Rig) -> tuple[bytes, int]:
    """The packed limits (`<i` each, FIELDS order) and their CRC-32. Raises RigError."""
    values = limits_values(rig)
    blob = struct.pack(f"<{len(FIELDS)}i", *(values[name] for name in FIELDS))
    return blob, binascii.crc32(blob)


def limits_values(rig: Rig) -> dict[str, int]:
    """Every limit field by name. Raises RigError when one cannot be told to a board."""
    values: dict[str, int] = {}
    for channel in CHANNELS:
        values.update(_channel_values(rig, channel))
    values.update(_pressure_values(rig))
    values.update(_current_values(rig))
    values.update(heat_values(rig))
    values.update(regulator_values(rig))
    values.update(_time_values(rig))
    for name in FIELDS:
        if not -SMALL <= values[name] < SMALL:
            raise RigError(f"limit {name} does not fit the board", at=str(rig.source),
                           got=str(values[name]), bound=f"less than {SMALL} in size",
                           try_="check the unit of the value behind it")
    return values


def ticks(rig: Rig, seconds: float) -> int:
    """Seconds in whole ticks, at least one."""
    return max(1, round(seconds / rig.board.tick))


def _scale(name: str) -> float:
    """Board units per SI unit: Pa for pressures, mA, mV."""
    return 1.0 if name in ("chamber", "outlet", "inlet") else 1000.0


def _channel_values(rig: Rig, name: str) -> dict[str, int]:
    sensor: Sensor | None = getattr(rig.sensors, name)
    if sensor is None:
        stated = {"inlet": rig.inlet.head, "supply": rig.driver.supply * 1000.0}.get(name, 0.0)
        empty = dict.fromkeys(
            ("present", "gain", "shift", "low_counts", "high_counts", "stuck_ticks", "jump"), 0)
        fields = {**empty, "offset": round(stated)}
    else:
        fields = _line(sensor, name) | _plausible(rig, sensor, name)
    return {f"{name}_{field}": value for field, value in fields.items()}


def per_count(sensor: Sensor, name: str) -> float:
    """Board units per raw count."""
    span = getattr(sensor, "high") - getattr(sensor, "low")  # noqa: B009
    return float(span) * _scale(name) / (sensor.counts_high - sensor.counts_low)


def _line(sensor: Sensor, name: str) -> dict[str, int]:
    """Gain, shift and offset: counts_full * gain below 2**30, the finest gain that allows."""
    slope = per_count(sensor, name)
    shift = 0
    while shift < 24 and sensor.counts_full * round(slope * (2 << shift)) < SMALL:
        shift += 1
    gain = round(slope * (1 << shift))
    if gain < 1 or sensor.counts_full * gain >= SMALL:
        raise RigError("this sensor's scale does not fit the board's integers",
                       at=key_text(("sensors", name)), got=f"{slope:g} per count",
                       bound="between 1e-3 and 65000 per count (Pa, mA or mV)",
                       try_="check low, high and the counts")
    # the shift rounds down by up to one unit; the offset rounds up to give some of it back
    low = getattr(sensor, "low") * _scale(name)  # noqa: B009
    offset = math.ceil(low - sensor.counts_low * gain / (1 << shift) - 1e-9)
    return {"present": 1, "gain": gain, "shift": shift, "offset": offset}


def _plausible(rig: Rig, sensor: Sensor, name: str) -> dict[str, int]:
    """Counts that a sound sensor can give, and how still or how fast it may be."""
    spare = round(_SPARE * (sensor.counts_high - sensor.counts_low))
    low = sensor.counts_low - spare
    if low < 1:  # the rail itself is a fault, unless zero is measured there (a shunt to ground)
        low = 1 if getattr(sensor, "low") < 0.0 else 0  # noqa: B009
    high = min(sensor.counts_high + spare, sensor.counts_full - 1)
    noise_counts = getattr(sensor, "noise") * _scale(name) / per_count(sensor, name)  # noqa: B009
    if sensor.stuck is not None:
        stuck = ticks(rig, sensor.stuck) if sensor.stuck else 0
    else:
        stuck = _STUCK_TICKS if noise_counts >= 0.5 else 0
    jump = getattr(sensor, "jump")  # noqa: B009
    return {"low_counts": low, "high_counts": high, "stuck_ticks": stuck,
            "jump": 0 if jump is None else max(1, round(jump * _scale(name)))}


def _pressure_values(rig: Rig) -> dict[str, int]:
    limits = rig.limits
    values = {}
    for name in ("outlet_reverse", "inlet_reverse", "chamber_high", "chamber_low", "outlet_high"):
        pair = getattr(limits, name)
        # towards safety: a high level rounds down, a low level up
        turn = math.ceil if name == "chamber_low" else math.floor
        values[f"{name}_soft_pa"] = turn(pair.soft)
        values[f"{name}_hard_pa"] = turn(pair.hard)
    values["outlet_low_hard_pa"] = math.ceil(limits.outlet_low)
    return values


def _current_values(rig: Rig) -> dict[str, int]:
    limits = rig.limits
    open_below = limits.coil_open_current
    if open_below is None:                 # a tenth of full current, clear of the sensor's noise
        sensor = rig.sensors.coil_a
        open_below = max(0.1 * limits.current, 5 * sensor.noise + 2 * sensor.uncertainty)
    return {
        "target_max_ma": math.floor(limits.current * 1000),
        "over_current_ma": math.floor(limits.over_current * 1000),
        "coil_open_ma": round(open_below * 1000),
        "coil_open_ticks": ticks(rig, limits.coil_open_time),
        "supply_low_mv": round((limits.supply_low or 0.0) * 1000),
    }


def _time_values(rig: Rig) -> dict[str, int]:
    limits = rig.limits
    floor_q8 = round(limits.fold_floor * 256)
    span_q8 = 256 - floor_q8
    deadman = rig.board.kind != "virtual" if limits.deadman is None else limits.deadman
    return {
        "fold_min_q8": floor_q8,
        "fold_fall_q8": max(1, math.ceil(span_q8 / ticks(rig, limits.fold_fall))),
        "fold_rise_q8": max(1, span_q8 // ticks(rig, limits.fold_rise)),
        "tick_us": rig.tick_us,
        "late_us": round(limits.tick_late * 1e6),
        "silence_ms": round(limits.host_silence * 1000),
        "ramp_ma": max(1, math.ceil(limits.current * 1000 / ticks(rig, limits.stop_ramp))),
        "sensor_bad_ticks": round(limits.sensor_bad / rig.board.tick),
        "deadman_needed": int(deadman),
        "tail_ticks": round(limits.tail / rig.board.tick),
    }
