"""The static proof of a program or a plan: what is known of it before power, with the bounds."""

from __future__ import annotations

import math
from typing import Any

from lodeboard import program as board

from ..errors import ScheduleError
from ..rig.models import Rig
from ..schedule.bounds import heat_bound
from ..schedule.compile import Program, compile_program
from ..schedule.heat import HeatBound, steady_winding_c
from ..schedule.load import load_schedule
from ..schedule.models import Plan
from .field import places, push_pa
from .interlocks import interlock_margins
from .warn import Stroke

_PLACES = 200


def prove_static(program: Program, rig: Rig) -> dict[str, Any]:
    """Numbers of a compiled program beside their bounds, all of which it has passed.

    `pressure_bound_pa` is the greatest magnetic pressure that the program's current can put across
    the slug: no chamber pressure can exceed it statically.
    """
    rows = program.rows()
    currents = [max(abs(row[3]), abs(row[4])) / 1000 for row in rows if row[0] == board.SEG]
    peak = max(currents, default=0.0)
    heat = [heat_bound(program, rig, bool(i))[0] for i in range(len(rig.coils))]
    pressure = max(abs(push_pa(rig, coil, x, peak))
                   for coil in rig.coils for x in places(rig, _PLACES))
    return {
        "title": program.title,
        "duration_s": program.ticks * program.tick_s,
        "ticks": program.ticks,
        "ticks_bound": board.MAX_TICKS,
        "cycles": program.cycles,
        "records": len(rows),
        "records_bound": board.MAX_RECORDS,
        "memory_bytes": len(program.records),
        "current_a": peak,
        "current_bound_a": rig.limits.current,
        "coil_c": max(heat),
        "coil_bound_c": rig.limits.coil_temperature.hard,
        "coil_soft_c": rig.limits.coil_temperature.soft,
        "coil_repeated_c": max(repeated_c(program, rig, i) for i in range(len(rig.coils))),
        "pressure_bound_pa": pressure,
        "chamber_high_hard_pa": rig.limits.chamber_high.hard,
        "strokes": [stroke._asdict() for stroke in strokes(program)],
        "interlocks": interlock_margins(rig, peak) if peak > 0.0 else [],
    }


def strokes(program: Program) -> list[Stroke]:
    """Each kind of cycle in a program once: rate, length of its first edge, greatest current."""
    found: list[Stroke] = []
    inside, ticks, edge, peak = False, 0, 0, 0
    for op, _, _, a, b, n in program.rows():
        if op in (board.CYCLE, board.CLOSE, board.END) or (inside and op == board.NEXT):
            if ticks:
                stroke = Stroke(1.0 / (ticks * program.tick_s), edge * program.tick_s, peak / 1000)
                if stroke not in found:
                    found.append(stroke)
            inside, ticks, edge, peak = op == board.CYCLE, 0, 0, 0
        elif op == board.SEG and inside:
            edge = edge or n
            ticks, peak = ticks + n, max(peak, abs(a), abs(b))
    return found


def mean_square_a2(program: Program, coil: int = 0) -> float:
    """Mean square current of a program over its whole length, in A²."""
    total, turns, stack, now = 0.0, 1.0, [], 0.0
    for op, _, _, a, b, n in program.rows():
        if op == board.LOOP:
            stack.append(turns)
            turns *= n
        elif op == board.NEXT:
            turns = stack.pop()
        elif op == board.SEG:
            end = (b if coil else a) / 1000
            total += turns * n * (now * now + now * end + end * end) / 3
            now = end
    return total / program.ticks if program.ticks else 0.0


def repeated_c(program: Program, rig: Rig, coil: int = 0) -> float:
    """Winding temperature if the program were repeated for ever (mean over a pass), degC."""
    return steady_winding_c(rig.coils[coil], mean_square_a2(program, coil), rig.ambient.temperature)


def prove_plan(plan: Plan, rig: Rig) -> dict[str, Any]:
    """The heat of a whole plan: all its passes without a break. Raises ScheduleError.

    Check-ups are rests for the coil, so leaving them out is on the safe side.
    """
    schedule = load_schedule(plan.schedule)
    program = compile_program(schedule, rig)
    passes = plan.target_cycles // plan.cycles_per_pass
    steady = repeated_c(program, rig)
    hottest = -math.inf
    rows = [(board.LOOP, 0, 0, 0, 0, passes), *program.rows()[:-1], (board.NEXT, 0, 0, 0, 0, 0)]
    for i, coil in enumerate(rig.coils):
        bound = HeatBound(rows, program.tick_s, coil, bool(i), rig.limits.coil_temperature.hard)
        hottest = max(hottest, rig.ambient.temperature + bound.run())
    limit = rig.limits.coil_temperature.hard
    if hottest > limit:
        raise ScheduleError(
            "the coil would get too hot over the whole plan", at=plan.source.name,
            got=f"at least {limit:.0f} degC: the static bound is {hottest:.0f} degC",
            bound=f"{limit:g} degC (limits.coil_temperature)",
            try_="less current or duty in the schedule, more rest, or a smaller target")
    return {"passes": passes, "duration_s": passes * program.ticks * program.tick_s,
            "coil_c": hottest, "coil_bound_c": limit, "coil_repeated_c": steady}
