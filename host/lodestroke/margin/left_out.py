"""Size of what the plant leaves out by choice: the liquid's own field, the traction at its faces."""

from __future__ import annotations

import math
from typing import Any

from ..plant.slug import demagnetisation_factor, magnetisation, normal_traction
from ..rig.models import Rig
from .field import face_pressure_pa, field_a_m


def left_out(rig: Rig) -> dict[str, Any]:
    """Own field and normal traction at rest and full current, Pa, beside the push they belong to."""
    slug, channel, coil = rig.slug, rig.channel, rig.coils[0]
    ms, chi = slug.saturation_magnetisation, slug.initial_susceptibility
    radius = channel.radius or math.sqrt(channel.area_m2 / math.pi)
    factor = demagnetisation_factor(slug.length, radius)
    fields = [field_a_m(rig, coil, z, rig.limits.current)
              for z in (slug.length / 2, -slug.length / 2)]
    plain = face_pressure_pa(rig, fields[0]) - face_pressure_pa(rig, fields[1])
    inner = [inside_a_m(h, factor, ms, chi) for h in fields]
    with_own = face_pressure_pa(rig, inner[0]) - face_pressure_pa(rig, inner[1])
    traction = float(normal_traction(fields[0], ms, chi) - normal_traction(fields[1], ms, chi))
    return {
        "demagnetisation_factor": factor,
        "own_field_pa": with_own - plain,
        "normal_traction_pa": traction,
        "push_at_rest_pa": plain,
    }


def inside_a_m(applied: float, factor: float, ms: float, chi: float) -> float:
    """The field inside the slug, H = H0 - N M(H), by bisection (M never falls with H)."""
    low, high = 0.0, abs(applied)
    for _ in range(60):
        middle = (low + high) / 2
        if middle + factor * magnetisation(middle, ms, chi) > abs(applied):
            high = middle
        else:
            low = middle
    return (low + high) / 2
