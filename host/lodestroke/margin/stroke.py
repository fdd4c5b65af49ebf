"""What a slow stroke moves: where the slug stands at full current and at none, and what that delivers.

Volume balance of a pump with check valves: dV - C (p_out - p_in + cracking of both sides), never below
zero (textbook balance of an ideal check-valve pump).
"""

from __future__ import annotations

import math
from typing import Any

from ..plant.valves import series_collapse
from ..rig.models import Rig
from ..rig.models_pump import Valve
from .field import PLACES, drag_pa_s_m3, inertance_pa_s2_m3, places, push_pa, return_pa


def cracking_pa(valves: list[Valve]) -> float:
    """Cracking pressure of valves in series, Pa."""
    return sum(valve.cracking for valve in valves)


def closing_pa(valves: list[Valve]) -> float:
    """Closing pressure of valves in series, Pa."""
    return sum(valve.closing for valve in valves)


def collapse_pa(valves: list[Valve]) -> float:
    """Reverse pressure at which the first of valves in series collapses, Pa."""
    return series_collapse([v.collapse for v in valves], [v.leak for v in valves])


def delivering_pa(rig: Rig) -> float:
    """Chamber pressure that opens the outlet, Pa."""
    return rig.outlet.head + cracking_pa(rig.valves.outlet)


def drawing_pa(rig: Rig) -> float:
    """Chamber pressure below which the inlet opens, Pa."""
    return rig.inlet.head - cracking_pa(rig.valves.inlet)


def front_m(rig: Rig, current_a: float | None = None, load_pa: float | None = None) -> float:
    """How far the slug comes at a steady current against a chamber pressure, m; -travel/2 if it stays.

    From the rear on, at the first place where push and spring no longer beat load and contact lines.
    """
    current = rig.limits.current if current_a is None else current_a
    against = (delivering_pa(rig) if load_pa is None else load_pa) + rig.slug.hysteresis
    start = rear_m(rig)
    reached = start
    for x in places(rig):
        if x < start:
            continue
        if push_pa(rig, rig.coils[0], x, current) + return_pa(rig, x, 0.0) <= against:
            break
        reached = x
    return reached


def rear_m(rig: Rig) -> float:
    """How far back the slug goes by itself while it draws through the inlet, m."""
    needed = drawing_pa(rig) - rig.slug.hysteresis
    at = rig.slug.travel / 2
    for x in reversed(places(rig)):
        if return_pa(rig, x) >= needed:
            break
        at = x
    return at


def stroke(rig: Rig) -> dict[str, Any]:
    """The static stroke at full current, and how slug, chamber and spring swing by themselves."""
    area, squeeze = rig.channel.area_m2, rig.chamber.compliance
    front, rear = front_m(rig), rear_m(rig)
    moved = area * max(0.0, front - rear)
    swing = delivering_pa(rig) - drawing_pa(rig)
    lost = squeeze * swing
    return {
        "load_pa": delivering_pa(rig),
        "rear_m": rear,
        "displacement_m": front,
        "moved_m3": moved,
        "lost_to_compliance_m3": lost,
        "volume_m3": max(0.0, moved - lost),
        "swept_limit_m3": area * rig.slug.travel,
        "shut_off_pa": shut_off_pa(rig),
        "highest_outlet_for_inlet_valve_pa": (
            collapse_pa(rig.valves.inlet) + rig.inlet.head - cracking_pa(rig.valves.outlet)),
        "outlet_rise_pa": max(0.0, moved - lost) / rig.outlet.compliance,
        **swings(rig),
    }


def shut_off_pa(rig: Rig) -> float:
    """Outlet pressure against which full current no longer delivers, Pa; below the inlet: never did.

    Where the moved volume is all taken by the chamber's compliance.
    """
    rear, area, squeeze = rear_m(rig), rig.channel.area_m2, rig.chamber.compliance
    drawn, cracking = drawing_pa(rig), cracking_pa(rig.valves.outlet)
    low = rig.inlet.head - 1e5
    high = rig.inlet.head + area * rig.slug.travel / squeeze + 1e3
    for _ in range(24):
        middle = (low + high) / 2
        moved = area * (front_m(rig, load_pa=middle + cracking) - rear)
        delivers = moved > squeeze * (middle + cracking - drawn)
        low, high = (middle, high) if delivers else (low, middle)
    return low


def swings(rig: Rig) -> dict[str, float]:
    """The slug on chamber and spring with both valves shut: natural frequency and damping ratio.

    m s² + c s + k in pressure and volume: I, R and 1/C + dp/dV of the spring (Newton's law with
    Poiseuille drag).
    """
    inertance, step = inertance_pa_s2_m3(rig), rig.slug.travel / PLACES
    slope = (return_pa(rig, -step, 0.0) - return_pa(rig, step, 0.0)) / (
        2 * step * rig.channel.area_m2)
    stiffness = 1.0 / rig.chamber.compliance + max(0.0, slope)
    omega = math.sqrt(stiffness / inertance)
    return {
        "resonance_hz": omega / (2 * math.pi),
        "damping_ratio": drag_pa_s_m3(rig) / (2 * math.sqrt(stiffness * inertance)),
        "spring_share_of_stiffness": 1.0 - 1.0 / (rig.chamber.compliance * stiffness),
    }
