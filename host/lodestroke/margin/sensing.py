"""Sensors against what they have to tell: one count, noise and uncertainty beside the smallest limit."""

from __future__ import annotations

import math
from typing import Any

from ..rig.limits_blob import per_count
from ..rig.models import Rig
from ..rig.models_sensors import PressureSensor, Sensor

K = 2.0                  # coverage factor of stated uncertainties (GUM, about 95 %)


def sensor_table(rig: Rig) -> dict[str, dict[str, float]]:
    """Per wired sensor: resolution, noise, uncertainty in SI, and counts of its smallest limit."""
    table = {}
    for name in type(rig.sensors).model_fields:
        sensor: Any = getattr(rig.sensors, name)
        if sensor is None:
            continue
        resolution = resolution_si(sensor, name)
        table[name] = {
            "resolution": resolution, "noise": sensor.noise,
            "uncertainty_k2": K * sensor.uncertainty, "lag_s": sensor.lag,
            "low": sensor.low, "high": sensor.high,
            "smallest_limit": smallest_limit(rig, name),
            "counts_of_smallest_limit": smallest_limit(rig, name) / resolution,
            "noise_counts": sensor.noise / resolution,
        }
    return table


def resolution_si(sensor: Sensor, name: str) -> float:
    """One count in Pa, A or V."""
    return per_count(sensor, name) / (1.0 if isinstance(sensor, PressureSensor) else 1000.0)


def smallest_limit(rig: Rig, name: str) -> float:
    """The limit closest to zero that this sensor serves, in size."""
    limits = rig.limits
    rows = {
        "chamber": (limits.chamber_high.soft, -limits.chamber_low.soft, limits.inlet_reverse.soft,
                    limits.outlet_reverse.soft),
        "outlet": (limits.outlet_high.soft, limits.outlet_reverse.soft),
        "inlet": (limits.inlet_reverse.soft,),
        "supply": (rig.driver.supply,),
    }.get(name, (limits.current,))
    return min(abs(value) for value in rows)


def doubt_k2(*sensors: Any) -> float:
    """Expanded uncertainty (k = 2) of a sum or difference of readings, uncorrelated (GUM)."""
    return K * math.hypot(*(sensor.uncertainty for sensor in sensors))


def noise_k4(*sensors: Any) -> float:
    """Four standard deviations of the noise of a sum or difference: passed once in 30,000 readings."""
    return 4.0 * math.hypot(*(sensor.noise for sensor in sensors))
