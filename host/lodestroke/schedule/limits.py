"""Limits that a step tightens, as the board's fields, checked against what holds around it."""

from __future__ import annotations

import math

from ..errors import ScheduleError
from ..rig.limits_blob import limits_values
from ..rig.models import Rig
from ..units import show
from .models import StepLimits

Tight = dict[str, int]       # limit field -> value in board units

# step key -> (hard field, soft field, board units per SI unit, SI unit, +1 high or -1 low level)
_FIELDS: dict[str, tuple[str, str, float, str, int]] = {
    "outlet_reverse": ("outlet_reverse_hard_pa", "outlet_reverse_soft_pa", 1, "Pa", 1),
    "inlet_reverse": ("inlet_reverse_hard_pa", "inlet_reverse_soft_pa", 1, "Pa", 1),
    "chamber_high": ("chamber_high_hard_pa", "chamber_high_soft_pa", 1, "Pa", 1),
    "chamber_low": ("chamber_low_hard_pa", "chamber_low_soft_pa", 1, "Pa", -1),
    "outlet_high": ("outlet_high_hard_pa", "outlet_high_soft_pa", 1, "Pa", 1),
    "outlet_low": ("outlet_low_hard_pa", "", 1, "Pa", -1),
    "current": ("target_max_ma", "", 1000, "A", 1),
    "coil_temperature": ("hot_hard_mc", "hot_soft_mc", 1000, "degC", 1),
}


def tighten(limits: StepLimits, rig: Rig, outer: Tight, place: str) -> Tight:
    """`outer` with a step's own limits over it; ScheduleError when one is looser than it may be.

    The soft level keeps its distance in proportion, so that the stroke is still held back first.
    """
    values = {**limits_values(rig), **outer}
    tight = dict(outer)
    for key, (hard, soft, scale, unit, sense) in _FIELDS.items():
        given = getattr(limits, key)
        if given is None:
            continue
        value = math.floor(given * scale) if sense > 0 else math.ceil(given * scale)
        if (value - values[hard]) * sense > 0:
            word = "at most" if sense > 0 else "at least"
            raise ScheduleError(
                "a step's limit is looser than the one around it", at=f"{place}, limits.{key}",
                got=show(given, unit), bound=f"{word} {show(values[hard] / scale, unit)}",
                try_="tighten it, or remove it")
        tight[hard] = value
        if soft:
            tight[soft] = _soft(value, values[hard], values[soft], rig, key)
    return tight


def _soft(value: int, hard: int, soft: int, rig: Rig, key: str) -> int:
    """The soft level for a tightened hard one."""
    if key == "coil_temperature":          # in proportion above the room, not above 0 degC
        room = round(rig.ambient.temperature * 1000)
        return room + math.floor((value - room) * (soft - room) / (hard - room))
    if key == "chamber_low":
        return math.ceil(value * soft / hard) if hard else soft
    return math.floor(value * soft / hard) if hard else soft
