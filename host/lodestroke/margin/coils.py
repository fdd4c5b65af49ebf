"""A coil priced: resistance, currents, time constants, its wire, and heat at duty with time to limit."""

from __future__ import annotations

import math
from typing import Any

from ..plant.slug import MU0
from ..rig.models import Rig
from ..rig.models_pump import Coil
from ..schedule.heat import TwoNode, hot_resistance, steady_winding_c
from .field import field_a_m

COPPER_OHM_M = 1.0 / 58e6        # IEC 60028, annealed, 20 degC
_DUTIES = (0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.8, 1.0)


def price_coil(rig: Rig, coil: Coil) -> dict[str, Any]:
    """Everything that `check` prints of one coil at full current."""
    limit = rig.limits.coil_temperature.hard
    ambient, current = rig.ambient.temperature, rig.limits.current
    driver, node = rig.driver, TwoNode(coil)
    fast, slow = node.time_constants()
    hot_ohm = hot_resistance(coil, limit)
    middle = field_a_m(rig, coil, coil.position, current)
    return {
        "name": coil.name,
        "resistance_ohm": coil.resistance,
        "resistance_at_limit_ohm": hot_ohm,
        "electric_time_constant_s": coil.inductance / (coil.resistance + driver.source_resistance),
        "field_middle_a_m": middle,
        "flux_density_middle_t": MU0 * middle,
        "greatest_current_cold_a": reachable_a(rig, hot_resistance(coil, ambient)),
        "greatest_current_hot_a": reachable_a(rig, hot_ohm),
        "ripple_a": driver.supply / (4.0 * coil.inductance * driver.pwm),
        "bus_at_full_current_v": bus_v(rig, hot_resistance(coil, ambient), current),
        "thermal_fast_s": fast,
        "thermal_slow_s": slow,
        "power_full_w": current**2 * hot_resistance(coil, ambient),
        "steady_at_duty_limit_c": steady_winding_c(
            coil, rig.limits.duty_cycle * current**2, ambient),
        "seconds_to_limit_at_full_current": time_to_limit(node, coil, current**2, ambient, limit),
        "heating_at_limit_k_s": current**2 * hot_ohm / coil.winding_heat,
        "greatest_steady_rms_a": greatest_steady_a(coil, ambient, limit),
        "runaway_rms_a": runaway_a(coil),
        **wire(coil, current),
        "at_duty": at_duty(rig, coil),
    }


def reachable_a(rig: Rig, ohm: float) -> float:
    """Greatest current that the supply can drive through a winding of so many ohm, A."""
    driver = rig.driver
    return driver.supply * driver.duty_max / (ohm + driver.source_resistance)


def bus_v(rig: Rig, ohm: float, current: float) -> float:
    """Supply behind its source resistance at a steady current, V; nan where it cannot give it.

    Power balance of an averaged bridge: bus (supply - bus) / Rs = I² R.
    """
    supply, source = rig.driver.supply, rig.driver.source_resistance
    under = supply**2 - 4.0 * source * current**2 * ohm
    return (supply + math.sqrt(under)) / 2.0 if under >= 0.0 else math.nan


def wire(coil: Coil, current: float) -> dict[str, float]:
    """The copper wire that gives this resistance in this window, and what it would carry.

    Mean-turn length N pi (r1 + r2); AWG by its definition in ASTM B258; inductance by Wheeler,
    Proc. IRE 16 (1928) 1398, multi-layer.
    """
    length = math.pi * coil.turns * (coil.inner_radius + coil.outer_radius)
    copper = COPPER_OHM_M * length / coil.resistance
    window = coil.length * (coil.outer_radius - coil.inner_radius)
    bare = math.sqrt(4.0 * copper / math.pi)
    return {
        "wire_length_m": length,
        "wire_diameter_m": bare,
        "wire_awg": 36.0 - 39.0 * math.log(bare / 0.127e-3) / math.log(92.0),
        "copper_fill": coil.turns * copper / window,
        "current_density_a_mm2": current / copper * 1e-6,
        "wheeler_inductance_h": wheeler_h(coil),
    }


def wheeler_h(coil: Coil) -> float:
    """Inductance of a multi-layer coil by Wheeler's formula, H: 0.8 a² N²/(6a + 9b + 10c) µH, inches."""
    inch = 0.0254
    a = (coil.inner_radius + coil.outer_radius) / 2 / inch
    b, c = coil.length / inch, (coil.outer_radius - coil.inner_radius) / inch
    return 0.8e-6 * a * a * coil.turns**2 / (6 * a + 9 * b + 10 * c)


def greatest_steady_a(coil: Coil, ambient_c: float, limit_c: float) -> float:
    """Greatest continuous rms current in A: I² R(T) Rth = T - Ta at the limit."""
    rth = coil.winding_to_body + coil.body_to_air
    return math.sqrt((limit_c - ambient_c) / (rth * hot_resistance(coil, limit_c)))


def runaway_a(coil: Coil) -> float:
    """Rms current without a steady temperature, 1/sqrt(Rth R20 alpha); inf without a coefficient."""
    gain = ((coil.winding_to_body + coil.body_to_air) * coil.resistance
            * coil.temperature_coefficient)
    return 1.0 / math.sqrt(gain) if gain > 0.0 else math.inf


def at_duty(rig: Rig, coil: Coil) -> list[dict[str, float]]:
    """Full current at some duties: steady winding temperature, and seconds from cold to the limit."""
    ambient, limit, node = rig.ambient.temperature, rig.limits.coil_temperature.hard, TwoNode(coil)
    duties = sorted({*_DUTIES, rig.limits.duty_cycle})
    rows = []
    for duty in duties:
        square = duty * rig.limits.current**2
        rows.append({
            "duty": duty, "steady_c": steady_winding_c(coil, square, ambient),
            "seconds_to_limit": time_to_limit(node, coil, square, ambient, limit)})
    return rows


def time_to_limit(
    node: TwoNode, coil: Coil, mean_square_a2: float, ambient_c: float, limit_c: float
) -> float:
    """Seconds from ambient to the limit, resistance taken as at the limit (rather early); or inf."""
    power = mean_square_a2 * hot_resistance(coil, limit_c)
    if ambient_c + node.steady(power)[0] <= limit_c:
        return math.inf
    low, high = 0.0, 1e6
    for _ in range(60):
        middle = (low + high) / 2
        reached = ambient_c + node.step(middle, power)[0, 2]
        low, high = (low, middle) if reached > limit_c else (middle, high)
    return high
