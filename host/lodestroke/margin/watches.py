"""Every interlock that has a limit, apart from the pressures that guard a valve: how far it is from
firing on a sound pump, how soon the coil is off, and what could have happened by then.

`unguarded_s` is the measure for whatever leaves the board blind: the time in which full current could
take the chamber from rest to the inlet valve's collapse (strike.py); infinite where no stroke can.
"""

from __future__ import annotations

import math
from typing import Any

from ..rig.limits_blob import limits_values
from ..rig.models import Rig
from ..rig.models_pump import Coil
from ..rig.models_sensors import PressureSensor
from ..schedule.bounds import slew_time
from ..schedule.heat import hot_resistance
from .coils import bus_v, time_to_limit
from .interlocks import reaction_s
from .sensing import K, doubt_k2, noise_k4, resolution_si
from .strike import Course

# IEC 60085 thermal classes, degC (from memory), and the usual allowance for the hot spot
CLASSES = (("A", 105.0), ("E", 120.0), ("B", 130.0), ("F", 155.0), ("H", 180.0), ("N", 200.0))
HOT_SPOT_K = 10.0
DEADMAN_S = 0.025            # RP2: five periods of 5 ms without a whole tick (lodeboard/hal_rp2.py)
_ESTIMATE_TICKS = 64         # lodeboard/thermal.py
_DAY_S = 86400.0


def watches(rig: Rig, courses: list[Course], unguarded_s: float) -> list[dict[str, Any]]:
    """One row per interlock: limit, headroom before it fires on sound work, time to act, margin to
    harm, both None where there is no number; `note` says what they mean."""
    rows = [_over_current(rig), *(_coil_hot(rig, coil) for coil in rig.coils), _coil_open(rig),
            _supply_low(rig), _host_silent(rig), _tick_late(rig, unguarded_s), _outlet_low(rig),
            _sensor_range(rig, unguarded_s)]
    steepest = max(course.steepest_pa_s() for course in courses)
    for name in type(rig.sensors).model_fields:
        if getattr(rig.sensors, name) is not None:
            rows.append(_stuck(rig, name, unguarded_s))
            rows.append(_jump(rig, name, steepest))
    return rows


def unguarded_s(rig: Rig, courses: list[Course], collapse_pa: float) -> float:
    """Seconds of full current from rest to the inlet valve's collapse, nobody watching; or inf."""
    doubt = K * rig.tolerances.collapse * collapse_pa
    return min(course.first_s(collapse_pa - doubt + rig.inlet.head) for course in courses)


def _row(name: str, limit: float | None, unit: str, note: str, **more: Any) -> dict[str, Any]:
    row: dict[str, Any] = {"interlock": name, "limit": limit, "unit": unit, "headroom": None,
                           "acts_within_s": None, "margin": None, "margin_unit": "s"}
    return row | more | {"note": note}


def _over_current(rig: Rig) -> dict[str, Any]:
    limit, sensor, coil = rig.limits.over_current, rig.sensors.coil_a, rig.coils[0]
    ripple = rig.driver.supply / (4.0 * coil.inductance * rig.driver.pwm)
    acts = sensor.lag + rig.board.tick
    volt = rig.driver.supply
    most = min(limit + doubt_k2(sensor) + volt / coil.inductance * acts,
               volt / (coil.resistance + rig.driver.source_resistance))
    return _row(
        "over_current", limit, "A",
        f"a sound coil reaches {most:.3g} A at most before the trip; a shorted one whatever the "
        "driver lets through: its own limit must stand it",
        headroom=limit - rig.limits.current - ripple / 2 - doubt_k2(sensor) - noise_k4(sensor),
        acts_within_s=acts, reached=most)


def _coil_hot(rig: Rig, coil: Coil) -> dict[str, Any]:
    limit = rig.limits.coil_temperature.hard
    acts = _ESTIMATE_TICKS * rig.board.tick + rig.limits.stop_ramp
    heating = rig.limits.current**2 * hot_resistance(coil, limit) / coil.winding_heat
    doubt = K * rig.tolerances.resistance * (limit - rig.ambient.temperature)
    reached = limit + doubt + heating * acts
    bears = next((row for row in CLASSES if row[1] - HOT_SPOT_K >= reached), None)
    note = (f"reaches {reached:.4g} degC by the estimate; insulation of class {bears[0]} "
            f"({bears[1]:g} degC, IEC 60085) or better bears it with {HOT_SPOT_K:g} K for the hot spot"
            if bears else f"reaches {reached:.4g} degC: more than any common insulation bears")
    return _row(
        "coil_hot", limit, "degC", note, coil=coil.name, acts_within_s=acts, reached=reached,
        headroom=limit - rig.limits.coil_temperature.soft, margin_unit="K",
        margin=bears[1] - HOT_SPOT_K - reached if bears else CLASSES[-1][1] - HOT_SPOT_K - reached)


def _coil_open(rig: Rig) -> dict[str, Any]:
    limit = rig.limits.coil_open_time
    rise = slew_time(0.0, rig.limits.current / 2, rig, 0) + rig.sensors.coil_a.lag
    return _row("coil_open", limit, "s", "no harm: no current flows; what counts is that a sound rise "
                f"to half of full current ({rise * 1e3:.3g} ms) does not look like it",
                headroom=limit - rise, acts_within_s=limit + rig.board.tick)


def _supply_low(rig: Rig) -> dict[str, Any]:
    limit, sensor = rig.limits.supply_low, rig.sensors.supply
    if limit is None or sensor is None:
        return _row("supply_low", None, "V", "not watched: a weak supply shows only as lost current")
    coil = rig.coils[0]
    normal = bus_v(rig, hot_resistance(coil, rig.ambient.temperature), rig.limits.current)
    needed = rig.limits.current * (
        hot_resistance(coil, rig.limits.coil_temperature.hard) + rig.driver.source_resistance
    ) / rig.driver.duty_max
    return _row("supply_low", limit, "V", f"full current in a hot coil needs {needed:.4g} V; a margin "
                "below zero means that current is lost before the trip", margin_unit="V",
                headroom=normal - limit - doubt_k2(sensor) - noise_k4(sensor),
                acts_within_s=sensor.lag + rig.board.tick + rig.limits.stop_ramp,
                margin=limit - needed)


def _host_silent(rig: Rig) -> dict[str, Any]:
    limit = rig.limits.host_silence
    acts = limit + rig.limits.stop_ramp
    from ..schedule.heat import TwoNode

    heat = min(time_to_limit(TwoNode(coil), coil, rig.limits.current**2, rig.ambient.temperature,
                             rig.limits.coil_temperature.hard) for coil in rig.coils)
    return _row("host_silent", limit, "s", "the program goes on alone for so long; margin: full current "
                "heats a cold coil to its limit only after that", acts_within_s=acts,
                margin=heat - acts)


def _tick_late(rig: Rig, unguarded: float) -> dict[str, Any]:
    limit = rig.limits.tick_late
    deadman = rig.board.kind != "virtual" and rig.limits.deadman is not False
    acts = min(limit, DEADMAN_S) if deadman else limit
    why = "the deadman drops enable first" if acts < limit else "nothing else watches meanwhile"
    return _row("tick_late", limit, "s", f"{why}; margin: full current could reach the inlet valve's "
                "collapse only after that", headroom=limit - rig.board.tick,
                acts_within_s=acts, margin=unguarded - acts)


def _outlet_low(rig: Rig) -> dict[str, Any]:
    limit, sensor = rig.limits.outlet_low, rig.sensors.outlet
    return _row("outlet_low", limit, "Pa", "suction on the outlet, or a sensor off its zero: nothing "
                "collapses by it", headroom=rig.outlet.head - limit - doubt_k2(sensor)
                - noise_k4(sensor), acts_within_s=reaction_s(rig, sensor.lag))


def _sensor_range(rig: Rig, unguarded: float) -> dict[str, Any]:
    acts = max(rig.limits.sensor_bad, rig.board.tick)
    return _row("sensor_range", rig.limits.sensor_bad, "s", "until then the last good value stands in; "
                "margin: full current could reach the inlet valve's collapse only after that",
                acts_within_s=acts, margin=unguarded - acts)


def _stuck(rig: Rig, name: str, unguarded: float) -> dict[str, Any]:
    sensor: Any = getattr(rig.sensors, name)
    ticks = limits_values(rig)[f"{name}_stuck_ticks"]
    if not ticks:
        return _row("sensor_stuck", None, "s", "not watched: noise below half a count, or switched off; "
                    "a frozen reading stays unseen", sensor=name)
    acts = ticks * rig.board.tick
    false = false_stuck_per_day(sensor.noise / resolution_si(sensor, name), ticks, rig.board.tick)
    guards = isinstance(sensor, PressureSensor)
    chance = f"{false:.2g} times a day" if false > 1e-9 else "practically never"
    return _row("sensor_stuck", acts, "s", f"by chance {chance} on a sound sensor"
                + ("; margin: full current could reach the inlet valve's collapse only after that"
                   if guards else ""), sensor=name, acts_within_s=acts, false_per_day=false,
                margin=unguarded - acts if guards else None)


def false_stuck_per_day(noise_counts: float, ticks: int, tick_s: float) -> float:
    """How often normal noise of so many counts (1 sd) repeats one reading `ticks` times in a row.

    The commonest reading's chance is that of a whole count about the mean; runs of n + 1 equal
    readings start at about (1 - p) p^n of all ticks.
    """
    if noise_counts <= 0.0:
        return _DAY_S / tick_s
    p = math.erf(0.5 / (noise_counts * math.sqrt(2.0)))
    return _DAY_S / tick_s * (1.0 - p) * p**ticks


def _jump(rig: Rig, name: str, steepest_pa_s: float) -> dict[str, Any]:
    sensor: Any = getattr(rig.sensors, name)
    unit = {"coil_a": "A", "coil_b": "A", "supply": "V"}.get(name, "Pa")
    if sensor.jump is None:
        return _row("sensor_jump", None, unit, "not watched", sensor=name)
    coil = rig.coils[0]
    rate = steepest_pa_s if unit == "Pa" else (
        rig.driver.supply / coil.inductance if unit == "A" else 0.0)
    tick = rig.board.tick
    share = 1.0 - math.exp(-tick / sensor.lag) if sensor.lag > 0.0 else 1.0
    honest = rate * tick * share + math.sqrt(2.0) * noise_k4(sensor)
    return _row("sensor_jump", sensor.jump, unit, f"the worst honest change in a tick is {honest:.3g} "
                f"{unit}", sensor=name, headroom=sensor.jump - honest, acts_within_s=tick)
