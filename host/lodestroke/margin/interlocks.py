"""Sensors against limits, and each interlock's distance to harm with everything counted in."""

from __future__ import annotations

import math
from typing import Any

from ..plant.slug import air_spring
from ..rig.limits_blob import per_count
from ..rig.models import Rig
from ..rig.models_sensors import PressureSensor
from ..schedule.bounds import slew_time

_K = 2.0                 # coverage factor of stated uncertainties (GUM, about 95 %)


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
    """One row per valve side: collapse less hard limit, less everything that can add to it.

    The rate of rise is that of the slug's inertance on the chamber's compliance under the greatest
    pressure that can drive it (undamped step response, so an upper bound): p * sqrt(1 / (I C)).
    A negative margin means that it cannot be shown statically; a dry-run shows what happens.
    """
    sensors, limits = rig.sensors, rig.limits
    inertance = rig.slug.density * rig.slug.length / rig.channel.area_m2
    omega = 1.0 / math.sqrt(inertance * rig.chamber.compliance)
    inlet_u = sensors.inlet.uncertainty if sensors.inlet is not None else 0.0
    inlet_lag = sensors.inlet.lag if sensors.inlet is not None else 0.0
    sides = (
        ("outlet_reverse", rig.valves.outlet, limits.outlet_reverse, _back_pa(rig),
         math.hypot(sensors.outlet.uncertainty, sensors.chamber.uncertainty),
         (sensors.outlet.lag, sensors.chamber.lag)),
        ("inlet_reverse", rig.valves.inlet, limits.inlet_reverse, push_pa,
         math.hypot(sensors.chamber.uncertainty, inlet_u), (sensors.chamber.lag, inlet_lag)),
    )
    rows = []
    for name, valves, pair, drive, uncertainty, lags in sides:
        # what is left to drive it once the limit is reached
        rate = max(0.0, drive - pair.hard) * omega
        collapse = min(valve.collapse for valve in valves)
        doubt = _K * rig.tolerances.collapse * collapse
        delay = reaction_s(rig, *lags)
        rows.append({
            "interlock": name, "collapse_pa": collapse, "hard_pa": pair.hard, "soft_pa": pair.soft,
            "driving_pa": drive, "sensor_pa": _K * uncertainty, "collapse_doubt_pa": doubt,
            "reaction_s": delay, "rate_pa_s": rate, "overshoot_pa": rate * delay,
            "margin_pa": collapse - pair.hard - _K * uncertainty - doubt - rate * delay,
        })
    return rows


def _back_pa(rig: Rig) -> float:
    """What can pull the chamber below the outlet: spring at full stroke, and outlet's limit."""
    area = rig.channel.area_m2
    volume = (rig.spring.volume or 0.0) if rig.spring.kind == "air" else 0.0
    pull = -air_spring(rig.slug.travel / 2, area, volume, rig.ambient.pressure, 1.0)
    return float(pull) + rig.limits.outlet_high.hard
