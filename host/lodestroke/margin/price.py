"""A rig priced before power: field, force, stroke, time constants, heat, and what was left out."""

from __future__ import annotations

import math
from typing import Any

from ..plant.coil import field_per_ampere
from ..plant.slug import (
    MU0,
    air_spring,
    demagnetisation_factor,
    drag_circle,
    drag_rectangle,
    magnetic_pressure,
    normal_traction,
)
from ..rig.models import Rig
from ..rig.models_pump import Coil
from ..schedule.heat import TwoNode, hot_resistance, steady_winding_c
from .interlocks import interlock_margins, sensor_table

_PLACES = 400            # places along the travel at which forces are looked at


def price(rig: Rig) -> dict[str, Any]:
    """Everything that `check` prints of a rig, SI numbers with the unit in each name.

    Formulas: see plant.coil and plant.slug (thick solenoid; ferrohydrodynamic Bernoulli equation,
    Rosensweig 1985) and schedule.heat (two-node network).
    """
    return {
        "coils": [_coil(rig, coil) for coil in rig.coils],
        "slug": _slug(rig),
        "stroke": _stroke(rig),
        "sensors": sensor_table(rig),
        "interlocks": interlock_margins(rig, greatest_push_pa(rig)),
        "left_out": _left_out(rig),
    }


def field_a_m(rig: Rig, coil: Coil, place_m: float, current_a: float) -> float:
    """A coil's field on the axis at a place counted from the resting slug's middle, A/m."""
    return current_a * field_per_ampere(
        place_m - coil.position, float(coil.turns), coil.length, coil.inner_radius,
        coil.outer_radius)


def push_pa(rig: Rig, coil: Coil, x_m: float, current_a: float) -> float:
    """Magnetic pressure across the slug displaced by x, towards the chamber, in Pa."""
    slug = rig.slug
    faces = (x_m + slug.length / 2, x_m - slug.length / 2)
    front, rear = (
        magnetic_pressure(field_a_m(rig, coil, z, current_a), slug.saturation_magnetisation,
                          slug.initial_susceptibility) for z in faces)
    return float(front - rear)


def greatest_push_pa(rig: Rig) -> float:
    """Greatest magnetic pressure across the slug, either way, over its travel at full current."""
    half = rig.slug.travel / 2
    return max(
        abs(push_pa(rig, coil, half * (2 * k / _PLACES - 1), rig.limits.current))
        for coil in rig.coils for k in range(_PLACES + 1))


def _coil(rig: Rig, coil: Coil) -> dict[str, Any]:
    limit = rig.limits.coil_temperature.hard
    ambient, current = rig.ambient.temperature, rig.limits.current
    node = TwoNode(coil)
    fast, slow = node.time_constants()
    hot_ohm = hot_resistance(coil, limit)
    volt = rig.driver.supply * rig.driver.duty_max
    return {
        "name": coil.name,
        "resistance_ohm": coil.resistance,
        "resistance_at_limit_ohm": hot_ohm,
        "electric_time_constant_s": coil.inductance / (
            coil.resistance + rig.driver.source_resistance),
        "field_middle_a_m": field_a_m(rig, coil, coil.position, current),
        "flux_density_middle_t": MU0 * field_a_m(rig, coil, coil.position, current),
        "greatest_current_hot_a": volt / (hot_ohm + rig.driver.source_resistance),
        "thermal_fast_s": fast,
        "thermal_slow_s": slow,
        "power_full_w": current**2 * hot_resistance(coil, ambient),
        "steady_at_duty_limit_c": steady_winding_c(
            coil, rig.limits.duty_cycle * current**2, ambient),
        "seconds_to_limit_at_full_current": _time_to(node, coil, current, ambient, limit),
        "greatest_steady_rms_a": _greatest_steady(coil, ambient, limit),
    }


def _greatest_steady(coil: Coil, ambient_c: float, limit_c: float) -> float:
    """Greatest continuous rms current in A: I² R(T) Rth = T - Ta at the limit."""
    rth = coil.winding_to_body + coil.body_to_air
    return math.sqrt((limit_c - ambient_c) / (rth * hot_resistance(coil, limit_c)))


def _time_to(
    node: TwoNode, coil: Coil, current_a: float, ambient_c: float, limit_c: float
) -> float:
    """Seconds from ambient to the limit under full current, resistance as at the limit (early)."""
    power = current_a**2 * hot_resistance(coil, limit_c)
    if ambient_c + node.steady(power)[0] <= limit_c:
        return math.inf
    low, high = 0.0, 1e6
    for _ in range(60):
        middle = (low + high) / 2
        reached = ambient_c + node.step(middle, power)[0, 2]
        low, high = (low, middle) if reached > limit_c else (middle, high)
    return high


def _slug(rig: Rig) -> dict[str, Any]:
    slug, channel, coil = rig.slug, rig.channel, rig.coils[0]
    current = rig.limits.current
    area = channel.area_m2
    front_h = field_a_m(rig, coil, slug.length / 2, current)
    rear_h = field_a_m(rig, coil, -slug.length / 2, current)
    ms, chi = slug.saturation_magnetisation, slug.initial_susceptibility
    front, rear = magnetic_pressure(front_h, ms, chi), magnetic_pressure(rear_h, ms, chi)
    if channel.shape == "circle":
        drag = drag_circle(slug.viscosity, slug.length, channel.radius or 0.0)
    else:
        drag = drag_rectangle(slug.viscosity, slug.length, channel.width or 0.0,
                              channel.height or 0.0)
    return {
        "field_front_a_m": front_h, "field_rear_a_m": rear_h,
        "pressure_front_pa": float(front), "pressure_rear_pa": float(rear),
        "push_at_rest_pa": float(front - rear),
        "force_at_rest_n": float(front - rear) * area,
        "greatest_push_pa": greatest_push_pa(rig),
        "drag_pa_s_m3": drag,
        "inertance_pa_s2_m3": slug.density * slug.length / area,
        "fill_volume_m3": area * slug.length,
    }


def _stroke(rig: Rig) -> dict[str, Any]:
    """Static stroke at full current: how far the slug moves until push, spring and load balance."""
    load = rig.outlet.head + sum(valve.cracking for valve in rig.valves.outlet)
    half, coil, area = rig.slug.travel / 2, rig.coils[0], rig.channel.area_m2
    volume = (rig.spring.volume or 0.0) if rig.spring.kind == "air" else 0.0
    x = 0.0
    for k in range(1, _PLACES + 1):
        at = half * k / _PLACES
        spring = air_spring(at, area, volume, rig.ambient.pressure, 1.0)
        if push_pa(rig, coil, at, rig.limits.current) + spring <= load:
            break
        x = at
    squeezed = rig.chamber.compliance * load
    inertance = rig.slug.density * rig.slug.length / area
    stiffness = 1.0 / rig.chamber.compliance + (
        rig.ambient.pressure / volume if volume else 0.0)
    return {
        "load_pa": load,
        "displacement_m": x,
        "volume_m3": max(0.0, area * x - squeezed),
        "swept_limit_m3": area * half,
        "lost_to_compliance_m3": squeezed,
        "resonance_hz": math.sqrt(stiffness / inertance) / (2 * math.pi),
    }


def _left_out(rig: Rig) -> dict[str, Any]:
    """Size of what the plant leaves out by choice: the liquid's own field, the normal traction."""
    slug, channel, coil = rig.slug, rig.channel, rig.coils[0]
    ms, chi = slug.saturation_magnetisation, slug.initial_susceptibility
    radius = channel.radius or math.sqrt(channel.area_m2 / math.pi)
    factor = demagnetisation_factor(slug.length, radius)
    fields = [field_a_m(rig, coil, z, rig.limits.current)
              for z in (slug.length / 2, -slug.length / 2)]
    plain = float(magnetic_pressure(fields[0], ms, chi) - magnetic_pressure(fields[1], ms, chi))
    inner = [_inside(h, factor, ms, chi) for h in fields]
    with_own = float(magnetic_pressure(inner[0], ms, chi) - magnetic_pressure(inner[1], ms, chi))
    traction = float(normal_traction(fields[0], ms, chi) - normal_traction(fields[1], ms, chi))
    return {
        "demagnetisation_factor": factor,
        "own_field_pa": with_own - plain,
        "normal_traction_pa": traction,
        "push_at_rest_pa": plain,
    }


def _inside(applied: float, factor: float, ms: float, chi: float) -> float:
    """The field inside the slug, H = H0 - N M(H), by bisection (M never falls with H)."""
    from ..plant.slug import magnetisation

    low, high = 0.0, abs(applied)
    for _ in range(60):
        middle = (low + high) / 2
        if middle + factor * magnetisation(middle, ms, chi) > abs(applied):
            high = middle
        else:
            low = middle
    return (low + high) / 2
