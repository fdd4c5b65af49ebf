"""A rig priced before power: everything that `check` tells, as one dict of SI numbers."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from ..rig.models import Rig
from ..rig.pins import pin_table
from .coils import price_coil
from .field import (
    axis,
    drag_pa_s_m3,
    field_a_m,
    force,
    greatest_push_pa,
    inertance_pa_s2_m3,
    push_pa,
)
from .field import face_pressure_pa as _face
from .flow import flow_numbers
from .interlocks import interlock_margins, margins_by_current
from .left_out import left_out
from .priming import priming
from .sensing import sensor_table
from .strike import pushes, release, thinned
from .stroke import collapse_pa, stroke
from .warn import Stroke, warnings
from .watches import unguarded_s, watches

__all__ = ["greatest_push_pa", "price", "push_pa"]


def price(rig: Rig, strokes: Sequence[Stroke] = ()) -> dict[str, Any]:
    """Everything that `check` prints of a rig, SI numbers with the unit in each name.

    `strokes`: those of a schedule, for warnings that ask for a rate. Raises RigError for a rig that is
    too stiff to simulate.
    """
    facts = static_price(rig)
    current = rig.limits.current
    blind = pushes(rig, current)
    courses = [*blind, release(rig, current, rig.outlet.head)]
    speed = max(course.fastest_m_s() for course in courses)
    alone = unguarded_s(rig, blind, collapse_pa(rig.valves.inlet))
    facts |= {
        "interlocks": interlock_margins(rig),
        "margins_by_current": margins_by_current(rig),
        "worst_strokes": [thinned("push", blind[0]), thinned("release", courses[-1])],
        "unguarded_s": alone,
        "watches": watches(rig, courses, alone),
        "flow": flow_numbers(rig, speed, facts["stroke"]["resonance_hz"]),
    }
    facts["warnings"] = [found.as_json() for found in warnings(rig, facts, strokes)]
    return facts


def static_price(rig: Rig) -> dict[str, Any]:
    """The part that needs no simulated stroke."""
    return {
        "coils": [price_coil(rig, coil) for coil in rig.coils],
        "slug": _slug(rig),
        "stroke": stroke(rig),
        "axis": axis(rig),
        "force": force(rig),
        "sensors": sensor_table(rig),
        "priming": priming(rig),
        "pins": pin_table(rig),
        "left_out": left_out(rig),
    }


def _slug(rig: Rig) -> dict[str, Any]:
    slug, coil = rig.slug, rig.coils[0]
    front_h, rear_h = (field_a_m(rig, coil, z, rig.limits.current)
                       for z in (slug.length / 2, -slug.length / 2))
    front, rear = _face(rig, front_h), _face(rig, rear_h)
    return {
        "field_front_a_m": front_h, "field_rear_a_m": rear_h,
        "pressure_front_pa": front, "pressure_rear_pa": rear,
        "push_at_rest_pa": front - rear,
        "force_at_rest_n": (front - rear) * rig.channel.area_m2,
        "greatest_push_pa": greatest_push_pa(rig),
        "drag_pa_s_m3": drag_pa_s_m3(rig),
        "inertance_pa_s2_m3": inertance_pa_s2_m3(rig),
        "fill_volume_m3": rig.channel.area_m2 * slug.length,
    }
