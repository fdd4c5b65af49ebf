"""Fluid numbers: what kind of flow it is, and which of the plant's assumptions that leaves standing."""

from __future__ import annotations

import math
from typing import Any

from ..rig.models import Rig
from ..rig.models_pump import Channel
from .liquid import pumped

GRAVITY = 9.80665
LAMINAR_BELOW = 2000.0       # Reynolds number in a round tube; common practice


def hydraulic_radius_m(channel: Channel) -> float:
    """Radius of a circle; twice area over perimeter of a rectangle."""
    if channel.shape == "circle":
        return channel.radius or 0.0
    w, h = channel.width or 0.0, channel.height or 0.0
    return w * h / (w + h)


def reynolds(density: float, viscosity: float, speed: float, radius: float) -> float:
    """rho v d / mu."""
    return density * speed * 2.0 * radius / viscosity


def womersley(density: float, viscosity: float, rate_hz: float, radius: float) -> float:
    """r sqrt(omega rho / mu). Source: Womersley 1955."""
    return radius * math.sqrt(2.0 * math.pi * rate_hz * density / viscosity)


def film_share(capillary: float) -> float:
    """Film left on the wall over the radius, 1.34 Ca^2/3 / (1 + 3.35 Ca^2/3).

    Source: Aussillous and Quere, Phys. Fluids 12 (2000) 2367; for slow slugs Bretherton's law.
    """
    part = 1.34 * math.pow(capillary, 2 / 3)
    return part / (1.0 + 2.5 * part)


def flow_numbers(rig: Rig, speed: float, resonance_hz: float) -> dict[str, Any]:
    """Reynolds, Womersley, capillary and Bond numbers at the slug's greatest speed (m/s).

    What needs the slug's surface tension is None where the rig leaves it out.
    """
    slug, liquid, radius = rig.slug, pumped(rig), hydraulic_radius_m(rig.channel)
    valves = [*rig.valves.inlet, *rig.valves.outlet]
    return {
        "greatest_speed_m_s": speed,
        "liquid_density_kg_m3": liquid.density, "liquid_viscosity_pa_s": liquid.viscosity,
        "reynolds_slug": reynolds(slug.density, slug.viscosity, speed, radius),
        "reynolds_liquid": reynolds(liquid.density, liquid.viscosity, speed, radius),
        "womersley_slug_at_1_hertz": womersley(slug.density, slug.viscosity, 1.0, radius),
        "womersley_slug_at_resonance": womersley(
            slug.density, slug.viscosity, resonance_hz, radius),
        "womersley_liquid_at_1_hertz": womersley(liquid.density, liquid.viscosity, 1.0, radius),
        **_capillary(rig, speed, radius),
        "valve_time_constant_s": max(
            valve.resistance for valve in valves) * rig.chamber.compliance,
        "outlet_time_constant_s": rig.outlet.restriction * rig.outlet.compliance,
        "leak_m3_s": _leak(rig),
    }


def _capillary(rig: Rig, speed: float, radius: float) -> dict[str, float | None]:
    slug, tension = rig.slug, rig.slug.surface_tension
    if tension <= 0.0:
        return dict.fromkeys(("capillary", "film_share_of_radius", "film_volume_share", "bond",
                              "capillary_pressure_pa"))
    capillary = slug.viscosity * speed / tension
    film = film_share(capillary)
    return {
        "capillary": capillary, "film_share_of_radius": film,
        "film_volume_share": 1.0 - (1.0 - film)**2,
        "bond": slug.density * GRAVITY * radius**2 / tension,
        "capillary_pressure_pa": 2.0 * tension / radius,
    }


def _leak(rig: Rig) -> float:
    """Back through closed outlet valves under the head between outlet and inlet, m3/s."""
    head = max(0.0, rig.outlet.head - rig.inlet.head)
    return head / sum(valve.leak for valve in rig.valves.outlet)
