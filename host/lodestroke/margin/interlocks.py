"""Sensors against limits, and each interlock's distance to harm with everything counted in."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

from ..plant.slug import air_spring
from ..rig.limits_blob import per_count
from ..rig.models import Rig
from ..rig.models_sensors import PressureSensor
from ..schedule.bounds import slew_time

_K = 2.0                 # coverage factor of stated uncertainties (GUM, about 95 %)


class Guard(NamedTuple):
    """An interlock that keeps a valve from collapse."""

    name: str
    collapse_pa: float
    reverse_pa: float          # across the valve when the hard limit is reached
    driving_pa: float          # what can drive it further
    per_s: float               # rate constant of that
    sensors: list[PressureSensor]


def sensor_table(rig: Rig) -> dict[str, dict[str, float]]:
    """Per wired sensor: resolution, noise, uncertainty in SI, and counts of its smallest limit."""
    table = {}
    for name in type(rig.sensors).model_fields:
        sensor = getattr(rig.sensors, name)
        if sensor is None:
            continue
        scale = 1.0 if isinstance(sensor, PressureSensor) else 1000.0
        resolution = per_count(sensor, name) / scale
        table[name] = {
            "resolution": resolution, "noise": sensor.noise,
            "uncertainty_k2": _K * sensor.uncertainty, "lag_s": sensor.lag,
            "low": sensor.low, "high": sensor.high,
            "counts_of_smallest_limit": _smallest(rig, name) / resolution,
        }
    return table


def _smallest(rig: Rig, name: str) -> float:
    """The limit closest to zero that this sensor serves."""
    limits = rig.limits
    rows = {
        "chamber": (limits.chamber_high.soft, -limits.chamber_low.soft, limits.inlet_reverse.soft,
                    limits.outlet_reverse.soft),
        "outlet": (limits.outlet_high.soft, limits.outlet_reverse.soft),
        "inlet": (limits.inlet_reverse.soft,),
        "supply": (rig.driver.supply,),
    }.get(name, (limits.current,))
    return min(abs(value) for value in rows)


def reaction_s(rig: Rig, *lags: float) -> float:
    """Seconds from a pressure to the coil being off: filter, one tick, and the current's fall."""
    full = rig.limits.current
    fall = max(slew_time(full, 0.0, rig, i) for i in range(len(rig.coils)))
    return max(lags, default=0.0) + rig.board.tick + fall


def interlock_margins(rig: Rig, push_pa: float) -> list[dict[str, Any]]:
    """One row per pressure interlock that guards a valve: collapse less the reverse pressure at its
    hard limit, less everything that can add to it before the current is off.

    A negative margin means that it cannot be shown by calculation; a dry-run shows what happens.
    """
    limits, inlet = rig.limits, rig.inlet.head
    inlet_valve = min(valve.collapse for valve in rig.valves.inlet)
    outlet_valve = min(valve.collapse for valve in rig.valves.outlet)
    back, omega = _back_pa(rig), _omega(rig)
    into_outlet = sum(valve.resistance for valve in rig.valves.outlet) * rig.outlet.compliance
    chamber, outlet = rig.sensors.chamber, rig.sensors.outlet
    inlet_sensor = [] if rig.sensors.inlet is None else [rig.sensors.inlet]
    rows = (
        ("outlet_reverse", outlet_valve, limits.outlet_reverse.hard, back, omega,
         [outlet, chamber]),
        ("inlet_reverse", inlet_valve, limits.inlet_reverse.hard, push_pa, omega,
         [chamber, *inlet_sensor]),
        ("chamber_high", inlet_valve, limits.chamber_high.hard - inlet, push_pa, omega, [chamber]),
        ("chamber_low", outlet_valve, rig.outlet.head - limits.chamber_low.hard, back, omega,
         [chamber]),
        ("outlet_high", outlet_valve, limits.outlet_high.hard - inlet, push_pa, 1.0 / into_outlet,
         [outlet]),
    )
    return [_row(rig, Guard(*row)) for row in rows]


def _row(rig: Rig, guard: Guard) -> dict[str, Any]:
    """The rate of rise is what is left to drive it, times the rate constant."""
    rate = max(0.0, guard.driving_pa - guard.reverse_pa) * guard.per_s
    uncertainty = _K * math.hypot(*(sensor.uncertainty for sensor in guard.sensors))
    doubt = _K * rig.tolerances.collapse * guard.collapse_pa
    delay = reaction_s(rig, *(sensor.lag for sensor in guard.sensors))
    return {
        "interlock": guard.name, "collapse_pa": guard.collapse_pa,
        "reverse_at_hard_pa": guard.reverse_pa, "driving_pa": guard.driving_pa,
        "sensor_pa": uncertainty, "collapse_doubt_pa": doubt,
        "reaction_s": delay, "rate_pa_s": rate, "overshoot_pa": rate * delay,
        "margin_pa": guard.collapse_pa - guard.reverse_pa - uncertainty - doubt - rate * delay,
    }


def _omega(rig: Rig) -> float:
    """Rate constant in 1/s of the slug's inertance on the chamber's compliance, 1/sqrt(I C).

    Undamped step response, so an upper bound.
    """
    inertance = rig.slug.density * rig.slug.length / rig.channel.area_m2
    return 1.0 / math.sqrt(inertance * rig.chamber.compliance)


def _back_pa(rig: Rig) -> float:
    """What can pull the chamber below the outlet: spring at full stroke, and outlet's limit."""
    area = rig.channel.area_m2
    volume = (rig.spring.volume or 0.0) if rig.spring.kind == "air" else 0.0
    pull = -air_spring(rig.slug.travel / 2, area, volume, rig.ambient.pressure, 1.0)
    return float(pull) + rig.limits.outlet_high.hard
