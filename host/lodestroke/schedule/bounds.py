"""Static bounds: what can be known of a program before power, and refused here."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from lodeboard import program as board
from lodeboard.limits import FIELDS

from ..errors import ScheduleError
from ..rig.limits_blob import per_count
from ..rig.models import Rig
from ..units import show
from .heat import HeatBound, hot_resistance
from .shape import Shape

if TYPE_CHECKING:
    from .compile import Program

_SUM_MAX = (1 << 30) - 1
_LEFT = 0.05             # a half bridge lets current fall by itself: down to so much of full counts
_RATE_ERROR = 0.02       # greatest share by which whole ticks may change a wave's period


def judge_wave(shape: Shape, rig: Rig, place: str) -> None:
    """Refuse a wave that the board's ticks, its sums or the bridge cannot do, or too much duty."""
    tick = rig.board.tick
    up, top, down, end = shape.edges(tick)
    if up < 1 or down - top < 1:
        name = "rise" if up < 1 else "fall"
        raise ScheduleError(f"the wave's {name} is shorter than a tick", at=place,
                            got=show(shape.rise if up < 1 else shape.fall, "s"),
                            bound=f"at least {show(tick, 's')}", try_=f"lengthen {name}")
    if abs(end * tick - shape.period) > _RATE_ERROR * shape.period:
        raise ScheduleError("the wave is too fast for the board's tick", at=place,
                            got=f"{show(shape.period, 's')} a cycle",
                            bound=f"within {_RATE_ERROR:.0%} of whole ticks of {show(tick, 's')}",
                            try_="a lower rate, or a shorter board.tick")
    most = longest_cycle_ticks(rig)
    if end > most:
        raise ScheduleError("the cycle is too long for the board's sums", at=place,
                            got=show(shape.period, "s"), bound=f"at most {show(most * tick, 's')}",
                            try_="use hold, ramp and rest steps for slow work")
    if shape.b and len(rig.coils) < 2:
        raise ScheduleError("the wave drives a second coil and the rig has one", at=place,
                            got=show(shape.b, "A"), bound="one coil", try_="remove coil_b")
    share = duty_share(shape, rig)
    if share > rig.limits.duty_cycle:
        raise ScheduleError(
            "the wave's duty is over the rig's limit", at=place,
            got=f"{share:.3g} of full current, averaged over a cycle",
            bound=f"{rig.limits.duty_cycle:g} (limits.duty_cycle)",
            try_=f"lengthen rest to at least {show(_rest_for(shape, rig, share), 's')}, "
                 "or lower the current")


def duty_share(shape: Shape, rig: Rig) -> float:
    """Mean current over a cycle as a share of the greatest allowed; the worse coil's."""
    on = (shape.rise / 2 + shape.hold + shape.fall / 2) / shape.period
    return on * max(abs(shape.a), abs(shape.b)) / rig.limits.current


def _rest_for(shape: Shape, rig: Rig, share: float) -> float:
    return math.ceil(1000 * (shape.period * share / rig.limits.duty_cycle
                             - (shape.period - shape.rest))) / 1000


def longest_cycle_ticks(rig: Rig) -> int:
    """Longest cycle whose sums of pressure stay inside 30 bits."""
    most_pa = 1.0
    for name in ("chamber", "outlet", "inlet"):
        sensor = getattr(rig.sensors, name)
        if sensor is not None:
            slope = per_count(sensor, name)
            most_pa = max(most_pa, abs(sensor.low - slope * sensor.counts_low),
                          abs(sensor.low + slope * (sensor.counts_full - sensor.counts_low)))
    return int(_SUM_MAX // (most_pa + 1))


def judge_program(program: Program, rig: Rig) -> None:
    """Memory, length, current, slew, duty of ramps and holds, heat. Raises ScheduleError."""
    rows = program.rows()
    if len(rows) > board.MAX_RECORDS:
        raise ScheduleError("the program does not fit the board's memory", at=program.title,
                            got=f"{len(rows)} records", bound=f"at most {board.MAX_RECORDS}",
                            try_="repeat steps with `times`, or split the schedule")
    if program.ticks > board.MAX_TICKS:
        raise ScheduleError("the program is too long", at=program.title,
                            got=show(program.ticks * rig.board.tick, "s"),
                            bound=show(board.MAX_TICKS * rig.board.tick, "s"),
                            try_="split it; an endurance plan repeats a short schedule")
    _judge_segments(program, rig)
    _judge_duty(program, rig)
    for second in range(len(rig.coils)):
        peak_c, step = heat_bound(program, rig, bool(second))
        limit = rig.limits.coil_temperature.hard
        if peak_c > limit:
            raise ScheduleError(
                "the coil would get too hot", at=program.places[step],
                got=f"at least {limit:.0f} degC: the static bound is {peak_c:.0f} degC",
                bound=f"{limit:g} degC (limits.coil_temperature)",
                try_="less current or duty, more rest, or fewer repeats")


def heat_bound(program: Program, rig: Rig, second: bool = False) -> tuple[float, int]:
    """Upper bound of the winding's temperature in degC, from ambient, and the step of its peak."""
    bound = HeatBound(program.rows(), program.tick_s, rig.coils[int(second)], second,
                      rig.limits.coil_temperature.hard)
    return rig.ambient.temperature + bound.run(), bound.peak_step


def _judge_segments(program: Program, rig: Rig) -> None:
    """Every segment's current against the limit in force, and its slew against the supply."""
    full = math.floor(rig.limits.current * 1000)
    limit, now = full, [0, 0]
    for op, arg, step, a, b, n in program.rows():
        if op == board.RELAX:
            limit = full
        elif op == board.LIMIT and FIELDS[arg] == "target_max_ma":
            limit = n
        elif op == board.SEG:
            for coil, (start, end) in enumerate(((now[0], a), (now[1], b))):
                place = program.places[step] + (", second coil" if coil else "")
                _judge_current(end, limit, rig, coil, place)
                _judge_slew((start, end), n, rig, coil, place)
            now = [a, b]


def _judge_current(ma: int, limit: int, rig: Rig, coil: int, place: str) -> None:
    if ma and coil >= len(rig.coils):
        raise ScheduleError("a step drives a second coil and the rig has one", at=place,
                            got=show(ma / 1000, "A"), bound="one coil",
                            try_="remove to_b, current_b or coil_b")
    if ma < 0 and rig.driver.bridge == "half":
        raise ScheduleError("a half bridge cannot reverse the current", at=place,
                            got=show(ma / 1000, "A"), bound="at least 0 A",
                            try_='a positive current, or driver.bridge = "full"')
    if abs(ma) > limit:
        raise ScheduleError("the current is over the limit", at=place, got=show(ma / 1000, "A"),
                            bound=f"{show(limit / 1000, 'A')} (limits.current)",
                            try_="a lower current")


def slew_time(start: float, end: float, rig: Rig, coil: int) -> float:
    """Least time in s in which the supply can take a coil from one current to another (A).

    i(t) of an R-L circuit under full voltage; a half bridge only lets current fall by itself, and
    5 % of full current may then be left. Resistance at the soft temperature limit.
    """
    part, driver = rig.coils[coil], rig.driver
    ohm = hot_resistance(part, rig.ambient.temperature) + driver.source_resistance
    volt = driver.supply * driver.duty_max
    tau = part.inductance / ohm
    if abs(end) < abs(start) and driver.bridge == "half":
        floor = max(abs(end), _LEFT * rig.limits.current)
        return tau * math.log(max(1.0, abs(start) / floor))
    sign = 1.0 if end > start else -1.0
    head, left = volt - sign * ohm * start, volt - sign * ohm * end
    return math.inf if left <= 0.0 else tau * math.log(head / left)


def _judge_slew(edge: tuple[int, int], ticks: int, rig: Rig, coil: int, place: str) -> None:
    start, end = edge
    if start == end:
        return
    least = slew_time(start / 1000, end / 1000, rig, coil)
    if not math.isfinite(least):
        raise ScheduleError("the supply cannot drive this current", at=place,
                            got=show(end / 1000, "A"),
                            bound=f"{show(rig.driver.supply * rig.driver.duty_max, 'V')} available",
                            try_="a lower current")
    if ticks * rig.board.tick < least:
        raise ScheduleError(
            "the current changes faster than supply and inductance allow", at=place,
            got=f"{show(start / 1000, 'A')} to {show(end / 1000, 'A')} in "
                f"{show(ticks * rig.board.tick, 's')}",
            bound=f"at least {show(least, 's')}", try_="a slower rise or fall")


def _judge_duty(program: Program, rig: Rig) -> None:
    """Ramps and holds: the mean current of each step as a share of the greatest allowed."""
    spans: dict[int, float] = {}
    charge: dict[int, float] = {}
    in_cycle, now = False, [0, 0]
    for op, _, step, a, b, n in program.rows():
        in_cycle = op == board.CYCLE or (in_cycle and op != board.CLOSE)
        if op == board.SEG:
            if not in_cycle:
                mean = max((abs(now[0]) + abs(a)) / 2, (abs(now[1]) + abs(b)) / 2)
                spans[step] = spans.get(step, 0.0) + n
                charge[step] = charge.get(step, 0.0) + n * mean / 1000
            now = [a, b]
    for step, ticks in spans.items():
        share = charge[step] / ticks / rig.limits.current
        if share > rig.limits.duty_cycle and ticks > 2 * round(0.01 / program.tick_s):
            raise ScheduleError(
                "the step's duty is over the rig's limit", at=program.places[step],
                got=f"{share:.3g} of full current, averaged over the step",
                bound=f"{rig.limits.duty_cycle:g} (limits.duty_cycle)",
                try_="less current, or strokes with rests")
