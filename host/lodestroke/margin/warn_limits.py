"""What will disappoint of sensors, limits and interlocks."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any

from ..rig.models import Rig
from .sensing import noise_k4
from .warn import Stroke, Warn, brief, judgement

COUNTS_LEAST = 100.0      # of the smallest limit; common practice
_PRESSURES = ("chamber", "outlet", "inlet")


@judgement
def sensor_counts(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """A limit of a few counts is a coarse one."""
    for name, row in facts["sensors"].items():
        if row["counts_of_smallest_limit"] < COUNTS_LEAST:
            unit = {"coil_a": "A", "coil_b": "A", "supply": "V"}.get(name, "Pa")
            yield Warn("sensor_coarse", f"sensor {name} is coarse for its smallest limit",
                       f"{row['counts_of_smallest_limit']:.0f} counts of "
                       f"{brief(row['resolution'], unit)} for {brief(row['smallest_limit'], unit)}",
                       f"at least {COUNTS_LEAST:.0f} counts",
                       "a narrower range, or a converter of more bits")


@judgement
def collapse_margins(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """A trip that comes too late for the valve."""
    for row in facts["interlocks"]:
        if row["margin_pa"] < 0.0:
            words = row["interlock"].replace("_", " ")
            yield Warn(f"{row['interlock']}_too_late",
                       f"{row['cause']} collapses the {row['valve']} valve in spite of the {words} trip",
                       f"{brief(row['stroke_reaches_pa'], 'Pa')} in reverse, margin "
                       f"{brief(row['margin_pa'], 'Pa')}",
                       f"{brief(row['collapse_pa'], 'Pa')} of collapse less its doubt",
                       f"strokes of at most {brief(row['holds_up_to_a'], 'A')}, slower "
                       "edges, a softer chamber, or a closer limit")


@judgement
def room_to_work(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Soft levels that a sound stroke already reaches, or that noise does."""
    for row in facts["interlocks"]:
        gap = row["reverse_at_soft_pa"] - row["normal_pa"]
        words = row["interlock"].replace("_", " ")
        if gap <= 0.0:
            yield Warn("soft_level_in_the_way", f"the soft level of {words} holds every stroke back",
                       f"{brief(row['normal_pa'], 'Pa')} across the {row['valve']} valve in a sound "
                       "stroke", f"below {brief(row['reverse_at_soft_pa'], 'Pa')}",
                       f"a wider limits.{row['interlock']}.soft, or a lower head")
        elif row["headroom_pa"] <= 0.0:
            yield Warn("soft_level_under_noise", f"noise and doubt reach the soft level of {words}",
                       f"{brief(gap, 'Pa')} between a sound stroke and the soft level",
                       f"above {brief(gap - row['headroom_pa'], 'Pa')}: uncertainty "
                       "(k = 2) and four times the noise",
                       f"a quieter sensor or a wider limits.{row['interlock']}.soft")


@judgement
def levels_apart(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Soft and hard level closer together than the noise of what is compared."""
    sensors = rig.sensors
    for name, parts in (("outlet_reverse", (sensors.outlet, sensors.chamber)),
                        ("inlet_reverse", (sensors.chamber,)), ("chamber_high", (sensors.chamber,)),
                        ("chamber_low", (sensors.chamber,)), ("outlet_high", (sensors.outlet,))):
        pair = getattr(rig.limits, name)
        apart, noise = abs(pair.hard - pair.soft), noise_k4(*parts)
        if apart <= noise:
            yield Warn("levels_too_close", f"soft and hard level of {name} lie within the noise",
                       brief(apart, "Pa"), f"above {brief(noise, 'Pa')}, four times the "
                       "noise", "lower the soft level: it is there to hold back before the trip")


@judgement
def false_trips(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Interlocks that a sound pump would fire."""
    for row in facts["watches"]:
        where = f" of {row['sensor']}" if "sensor" in row else ""
        words = row["interlock"].replace("_", " ") + where
        room = row["headroom"]
        if room is not None and room <= 0.0:
            unit = row["unit"]
            yield Warn("false_trip", f"a sound pump can fire the {words} interlock",
                       f"{brief(room, unit)} of headroom",
                       f"above zero at a limit of {brief(row['limit'], unit)}; {row['note']}",
                       "a wider limit or a quieter sensor")
        if row.get("false_per_day", 0.0) >= 0.01:
            yield Warn("false_trip", f"noise alone fires the {words} interlock",
                       f"{row['false_per_day']:.2g} times a day", "less than once in 100 days",
                       "a longer time for `stuck`")


@judgement
def blind_times(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Longer without eyes than a stroke needs to the collapse; insulation; what nobody watches."""
    for name in ("tick_late", "sensor_range", "sensor_stuck"):
        yield from _blind(name, [row for row in facts["watches"] if row["interlock"] == name
                                 and row["margin"] is not None and row["margin"] < 0.0])
    for row in facts["watches"]:
        late = row["margin"] is not None and row["margin"] < 0.0
        if late and row["interlock"] == "coil_hot":
            yield Warn("too_hot_for_insulation", "no common insulation bears the coil's limit",
                       row["note"], "below 190 degC with the heating until it acts",
                       "a lower limits.coil_temperature")
        if late and row["interlock"] == "host_silent":
            yield Warn("silence_too_long", "a silent host leaves full current on for longer than a cold "
                       "coil bears", brief(row["acts_within_s"], "s"),
                       f"{brief(row['acts_within_s'] + row['margin'], 's')} to its limit",
                       "a shorter limits.host_silence")
        if late and row["interlock"] == "supply_low":
            yield Warn("supply_trip_late", "current is lost before the supply's trip",
                       f"trips at {brief(row['limit'], 'V')}", row["note"], "a higher limits.supply_low")
    unseen = [row["sensor"] for row in facts["watches"]
              if row["interlock"] == "sensor_stuck" and row["limit"] is None
              and row["sensor"] in _PRESSURES]
    if unseen:
        yield Warn("freeze_unseen", "a frozen reading would not be noticed: " + ", ".join(unseen),
                   "noise below half a count, or `stuck` switched off", "half a count of noise",
                   "set `stuck`, or more gain: an honest reading moves")


def _blind(name: str, rows: list[dict[str, Any]]) -> Iterator[Warn]:
    """One warning of an interlock that acts too late, for whichever sensors."""
    if not rows:
        return
    of = ", ".join(row["sensor"] for row in rows if "sensor" in row)
    acts = max(row["acts_within_s"] for row in rows)
    stroke = min(row["acts_within_s"] + row["margin"] for row in rows)
    yield Warn("blind_too_long", f"the {name.replace('_', ' ')} interlock{' of ' if of else ''}{of} "
               "leaves the valves unguarded for longer than a stroke needs",
               f"{brief(acts, 's')} until it acts",
               f"{brief(stroke, 's')} from rest to the inlet valve's collapse at full current",
               "a shorter time, or softer strokes")


@judgement
def slow_sensors(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """A lag of the order of the slug's own swing shows a peak too small."""
    own = facts["stroke"]["resonance_hz"]
    for name in _PRESSURES:
        sensor = getattr(rig.sensors, name)
        if sensor is None:
            continue
        gain = 1.0 / math.hypot(1.0, 2.0 * math.pi * own * sensor.lag)
        if gain < 0.9:
            yield Warn("sensor_slow", f"sensor {name} shows the slug's swings too small",
                       f"{gain:.0%} of a swing of {brief(own, 'Hz')}",
                       "at least 90 % (first-order lag)", "a faster sensor or filter")
    if rig.board.tick > 0.1 / own:
        yield Warn("tick_slow_for_pump", "the control tick is coarse for the slug's swings",
                   brief(rig.board.tick, "s"), f"at most {brief(0.1 / own, 's')}, a tenth "
                   f"of a period at {brief(own, 'Hz')}", "a shorter board.tick")
