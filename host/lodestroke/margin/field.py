"""Field, magnetic pressure and return pressure of a rig, along its axis and over the slug's travel.

Formulas: plant.coil (thick solenoid) and plant.slug (ferrohydrodynamic Bernoulli equation, Rosensweig
1985). Places are counted from the resting slug's middle, towards the chamber.
"""

from __future__ import annotations

from typing import Any

from ..plant.coil import field_per_ampere
from ..plant.slug import air_spring, drag_circle, drag_rectangle, magnetic_pressure
from ..rig.models import Rig
from ..rig.models_pump import Coil

PLACES = 400             # places along the travel at which forces are looked at
_POINTS = 61             # points of a printed curve
_SHARES = (1 / 3, 2 / 3, 1.0)


def field_a_m(rig: Rig, coil: Coil, place_m: float, current_a: float) -> float:
    """A coil's field on the axis at a place counted from the resting slug's middle, A/m."""
    return current_a * field_per_ampere(
        place_m - coil.position, float(coil.turns), coil.length, coil.inner_radius,
        coil.outer_radius)


def face_pressure_pa(rig: Rig, field: float) -> float:
    """Magnetic pressure of the slug's liquid in a field (A/m), in Pa."""
    return float(magnetic_pressure(field, rig.slug.saturation_magnetisation,
                                   rig.slug.initial_susceptibility))


def push_pa(rig: Rig, coil: Coil, x_m: float, current_a: float) -> float:
    """Magnetic pressure across the slug displaced by x, towards the chamber, in Pa."""
    half = rig.slug.length / 2
    return (face_pressure_pa(rig, field_a_m(rig, coil, x_m + half, current_a))
            - face_pressure_pa(rig, field_a_m(rig, coil, x_m - half, current_a)))


def places(rig: Rig, n: int = PLACES) -> list[float]:
    """n + 1 even displacements from the rear to the front stop, m."""
    half = rig.slug.travel / 2
    return [half * (2 * k / n - 1) for k in range(n + 1)]


def greatest_push_pa(rig: Rig) -> float:
    """Greatest magnetic pressure across the slug, either way, over its travel at full current."""
    return max(abs(push_pa(rig, coil, x, rig.limits.current))
               for coil in rig.coils for x in places(rig))


def spring_pa(rig: Rig, x_m: float) -> float:
    """What the return spring puts on the slug displaced by x, towards the chamber, in Pa."""
    if rig.spring.kind != "air":
        return 0.0
    return float(air_spring(x_m, rig.channel.area_m2, rig.spring.volume or 0.0,
                            rig.ambient.pressure, 1.0))


def return_pa(rig: Rig, x_m: float, current_a: float | None = None) -> float:
    """What takes the slug back: its spring, and the second coil at full current where there is one."""
    current = rig.limits.current if current_a is None else current_a
    second = push_pa(rig, rig.coils[1], x_m, current) if len(rig.coils) > 1 else 0.0
    return spring_pa(rig, x_m) + min(second, 0.0)


def drag_pa_s_m3(rig: Rig) -> float:
    """The slug's resistance to laminar flow, Pa s/m3 (Hagen-Poiseuille, or the rectangle's series)."""
    slug, channel = rig.slug, rig.channel
    if channel.shape == "circle":
        return drag_circle(slug.viscosity, slug.length, channel.radius or 0.0)
    return drag_rectangle(slug.viscosity, slug.length, channel.width or 0.0, channel.height or 0.0)


def inertance_pa_s2_m3(rig: Rig) -> float:
    """The slug's inertance rho L / A, Pa s2/m3."""
    return rig.slug.density * rig.slug.length / rig.channel.area_m2


def axis(rig: Rig) -> dict[str, Any]:
    """Field of each coil and magnetic pressure of the liquid along the axis at full current.

    Lists of equal length: place_m, field_a_m (one list a coil), pressure_pa (of coil a's field).
    """
    reach = (rig.slug.length + rig.slug.travel) / 2
    ends = [coil.position + sign * coil.length / 2 for coil in rig.coils for sign in (-1, 1)]
    low, high = min(-reach, *ends), max(reach, *ends)
    at = [low + (high - low) * k / (_POINTS - 1) for k in range(_POINTS)]
    current = rig.limits.current
    fields = [[field_a_m(rig, coil, z, current) for z in at] for coil in rig.coils]
    return {
        "current_a": current, "place_m": at, "field_a_m": fields,
        "pressure_pa": [face_pressure_pa(rig, h) for h in fields[0]],
        "coil_ends_m": [ends[2 * i:2 * i + 2] for i in range(len(rig.coils))],
        "face_reach_m": [-reach, reach],
    }


def force(rig: Rig) -> dict[str, Any]:
    """Push at a third, two thirds and all of full current, and the return, over the travel.

    displacement_m, return_pa; push_pa holds one list for each of currents_a; all of coil a.
    """
    at = places(rig, _POINTS - 1)
    currents = [share * rig.limits.current for share in _SHARES]
    return {
        "displacement_m": at, "currents_a": currents,
        "push_pa": [[push_pa(rig, rig.coils[0], x, i) for x in at] for i in currents],
        "return_pa": [return_pa(rig, x) for x in at],
        "area_m2": rig.channel.area_m2,
    }
