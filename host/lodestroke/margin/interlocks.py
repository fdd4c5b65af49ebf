"""Each pressure interlock that guards a valve: its distance to collapse with everything counted in.

A row takes off sensor uncertainty (k = 2), the doubt of the collapse pressure (k = 2), and the
overshoot: what the pressure still gains after the level, through filter lag, one tick, the fall of the
current and the slug's own momentum. The overshoot is that of the worst single stroke through the plant
(strike.py); the bound that no stroke can pass stands beside it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from ..rig.models import Rig
from ..schedule.bounds import slew_time
from . import strike
from .field import push_pa
from .sensing import K, doubt_k2, noise_k4
from .stroke import collapse_pa, delivering_pa, drawing_pa, stroke

_HALVINGS = 10           # when a current is searched: to a thousandth of full current


@dataclass(frozen=True)
class Guard:
    """An interlock that keeps a valve from collapse. Pressures are reverse, across that valve."""

    name: str
    valve: str                 # the side that it saves
    collapse_pa: float
    hard_pa: float             # across the valve when the hard level is read
    soft_pa: float
    normal_pa: float           # across the valve in a sound stroke against the stated head
    sensors: list[Any]
    cause: str                 # the stroke that it is there for
    worth_pa: float            # reverse pressure less what the interlock compares


def reaction_s(rig: Rig, *lags: float) -> float:
    """Seconds from a pressure to the coil being off: filter, one tick, and the current's fall."""
    full = rig.limits.current
    fall = max(slew_time(full, 0.0, rig, i) for i in range(len(rig.coils)))
    return max(lags, default=0.0) + rig.board.tick + fall


def guards(rig: Rig) -> list[Guard]:
    """The interlocks of a rig that guard a valve."""
    limits, inlet, sensors = rig.limits, rig.inlet.head, rig.sensors
    chamber, outlet = sensors.chamber, sensors.outlet
    near = [chamber] if sensors.inlet is None else [chamber, sensors.inlet]
    inlet_valve, outlet_valve = collapse_pa(rig.valves.inlet), collapse_pa(rig.valves.outlet)
    push, draw = delivering_pa(rig) - inlet, rig.outlet.head - drawing_pa(rig)
    rise = stroke(rig)["outlet_rise_pa"]
    return [
        Guard("outlet_reverse", "outlet", outlet_valve, limits.outlet_reverse.hard,
              limits.outlet_reverse.soft, draw, [outlet, chamber],
              "full current gone at once with the outlet at its soft level", 0.0),
        Guard("inlet_reverse", "inlet", inlet_valve, limits.inlet_reverse.hard,
              limits.inlet_reverse.soft, push, near,
              "full current at once against a blocked outlet", 0.0),
        Guard("chamber_high", "inlet", inlet_valve, limits.chamber_high.hard - inlet,
              limits.chamber_high.soft - inlet, push, [chamber],
              "full current at once against a blocked outlet", -inlet),
        Guard("chamber_low", "outlet", outlet_valve, rig.outlet.head - limits.chamber_low.hard,
              rig.outlet.head - limits.chamber_low.soft, draw, [chamber],
              "full current gone at once with a blocked inlet", rig.outlet.head),
        Guard("outlet_high", "outlet", outlet_valve, limits.outlet_high.hard - inlet,
              limits.outlet_high.soft - inlet, rig.outlet.head + rise - inlet, [outlet],
              "full push into a closed line behind the outlet", -inlet),
    ]


def interlock_margins(rig: Rig, current_a: float | None = None) -> list[dict[str, Any]]:
    """One row per pressure interlock that guards a valve: collapse less the reverse pressure at its
    hard limit, less everything that can add to it before the current is off and the slug has swung.

    `current_a`: strokes of that current; by default of limits.current. A margin below zero at full
    current is no lost rig: `holds_up_to_a` is the greatest current at which it is not.
    Raises RigError for a rig that is too stiff to simulate.
    """
    current = rig.limits.current if current_a is None else current_a
    return [_row(rig, guard, current) for guard in guards(rig)]


def margins_by_current(rig: Rig, points: int = 12) -> dict[str, Any]:
    """Margin of each interlock over the strokes' current: current_a, and a list per interlock, Pa."""
    currents = [rig.limits.current * (k + 1) / points for k in range(points)]
    rows: dict[str, Any] = {"current_a": currents}
    for guard in guards(rig):
        doubt = K * rig.tolerances.collapse * guard.collapse_pa
        least = guard.hard_pa + doubt_k2(*guard.sensors)
        rows[guard.name] = [guard.collapse_pa - doubt - max(least, reached_pa(rig, guard, current))
                            for current in currents]
    return rows


def _row(rig: Rig, guard: Guard, current: float) -> dict[str, Any]:
    uncertainty, doubt = doubt_k2(*guard.sensors), K * rig.tolerances.collapse * guard.collapse_pa
    level = guard.hard_pa + uncertainty
    least = guard.collapse_pa - level - doubt
    reached = reached_pa(rig, guard, current)
    bound = max(bound_pa(rig, guard), reached)
    return {
        "interlock": guard.name, "valve": guard.valve, "cause": guard.cause,
        "collapse_pa": guard.collapse_pa, "collapse_doubt_pa": doubt,
        "reverse_at_hard_pa": guard.hard_pa, "sensor_pa": uncertainty,
        "reaction_s": reaction_s(rig, *(sensor.lag for sensor in guard.sensors)),
        "stroke_reaches_pa": reached,
        "overshoot_pa": max(0.0, reached - level),
        "overshoot_bound_pa": max(0.0, bound - level),
        "margin_pa": least - max(0.0, reached - level),
        "margin_bound_pa": least - max(0.0, bound - level),
        "holds_up_to_a": _holds_up_to(rig, guard, current, guard.collapse_pa - doubt),
        "normal_pa": guard.normal_pa, "reverse_at_soft_pa": guard.soft_pa,
        "headroom_pa": guard.soft_pa - guard.normal_pa - uncertainty - noise_k4(*guard.sensors),
    }


def reached_pa(rig: Rig, guard: Guard, current: float) -> float:
    """Reverse pressure that the guarded valve sees in the worst stroke of this current, Pa."""
    level = guard.hard_pa + doubt_k2(*guard.sensors) - guard.worth_pa
    lags = (rig.sensors.chamber.lag, rig.sensors.outlet.lag)
    inlet = rig.inlet.head
    if guard.name == "inlet_reverse":
        courses = strike.pushes(rig, current, level_pa=level, lags=lags,
                                judge=lambda chamber, outlet: chamber - inlet)
    elif guard.name == "chamber_high":
        courses = strike.pushes(rig, current, level_pa=level, lags=lags,
                                judge=lambda chamber, outlet: chamber)
    elif guard.name == "chamber_low":
        swing = strike.release(rig, current, rig.outlet.head, "inlet", level_pa=level, lags=lags,
                               judge=lambda chamber, outlet: -chamber)
        return swing.outlet_reverse_pa()
    elif guard.name == "outlet_reverse":
        swing = strike.release(rig, current, rig.limits.outlet_high.soft, level_pa=level, lags=lags,
                               judge=lambda chamber, outlet: outlet - chamber)
        return swing.outlet_reverse_pa()
    else:
        return _outlet_reached_pa(rig, guard, current)
    return max(course.inlet_reverse_pa(inlet) for course in courses)


def _outlet_reached_pa(rig: Rig, guard: Guard, current: float) -> float:
    """A closed line filled through the outlet valves: no faster than push over their resistance."""
    push = max(push_pa(rig, rig.coils[0], 0.0, current), 0.0)
    start = rig.limits.outlet_high.hard + doubt_k2(*guard.sensors)
    if push <= start:
        return guard.normal_pa
    into = sum(valve.resistance for valve in rig.valves.outlet) * rig.outlet.compliance
    late = reaction_s(rig, rig.sensors.outlet.lag)
    return start + (push - start) * (1.0 - math.exp(-late / into)) - rig.inlet.head


def bound_pa(rig: Rig, guard: Guard) -> float:
    """What no stroke between the other limits can pass, whatever the schedule: the lesser of the
    energy and the volume bound of strike.py; reverse pressure across the guarded valve, Pa."""
    limits, inlet = rig.limits, rig.inlet.head
    late = reaction_s(rig, *(sensor.lag for sensor in guard.sensors))
    level = guard.hard_pa + doubt_k2(*guard.sensors)
    if guard.name == "outlet_high":
        return _outlet_reached_pa(rig, guard, limits.current)
    if guard.valve == "inlet":
        by_energy = strike.energy_bound_pa(rig, limits.chamber_low.hard, level + inlet,
                                           strike.push_drive_pa(rig), late)
        return min(by_energy, inlet + strike.swing_volume_pa(rig)) - inlet
    outlet = rig.outlet.head if guard.name == "chamber_low" else limits.outlet_high.soft
    return outlet - strike.release_bound_pa(rig)        # a trip switches no spring off


def _holds_up_to(rig: Rig, guard: Guard, current: float, most_pa: float) -> float:
    """Greatest current, A, whose worst stroke leaves the valve whole; 0 when none does."""
    if reached_pa(rig, guard, current) <= most_pa:
        return current
    low, high = 0.0, current
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        low, high = (middle, high) if reached_pa(rig, guard, middle) <= most_pa else (low, middle)
    return low
