"""A compiled program does what its schedule says: tick by tick, in three independent readings.

The schedule is evaluated here straight from its models, without records; the records are read by
the host's reference and by the board's own sequencer.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from lodeboard import program as board
from lodeboard.limits import FIELDS, Limits
from lodestroke.errors import ScheduleError
from lodestroke.rig import Rig, limits_blob, load_rig
from lodestroke.schedule import Program, Schedule, compile_program, load_schedule
from lodestroke.schedule.expand import expand
from lodestroke.schedule.models import (
    HoldStep,
    MarkStep,
    NestedStep,
    RampStep,
    RestStep,
    WaveStep,
)

CONFIGS = Path(__file__).parents[2] / "hil_configs"
TICK_S = 0.001
DOWN_TICKS = 10          # a current left over is taken down in 10 ms before strokes begin


def strong_rig() -> Rig:
    """The simulated bench with two cool coils on full bridges, so that few bounds are met."""
    rig = load_rig(CONFIGS / "bench-sim.toml")
    coil = rig.coils[0].model_copy(update={"winding_heat": 2000.0, "body_heat": 2000.0,
                                           "winding_to_body": 0.5, "body_to_air": 0.5})
    return rig.model_copy(update={
        "coils": [coil, coil],
        "driver": rig.driver.model_copy(update={"bridge": "full"}),
        "sensors": rig.sensors.model_copy(update={"coil_b": rig.sensors.coil_a}),
        "limits": rig.limits.model_copy(update={"duty_cycle": 1.0}),
    })


RIG = strong_rig()
amps = st.integers(-25, 25).map(lambda n: n / 10)
spans = st.integers(10, 90).map(lambda n: n / 1000)
marks = st.none() | st.integers(0, 65535)


@st.composite
def wave_values(draw: st.DrawFn) -> dict[str, Any]:
    values: dict[str, Any] = {"current": draw(amps), "rise": draw(spans), "fall": draw(spans)}
    if draw(st.booleans()):
        values |= {"hold": draw(spans | st.just(0.0)), "rest": draw(spans | st.just(0.0))}
    else:
        values |= {"rate": draw(st.sampled_from([1.0, 1.7, 3.0])),
                   "duty": draw(st.sampled_from([0.3, 0.4, 0.7]))}
    if draw(st.booleans()):
        values["coil_b"] = {"current": draw(st.none() | amps),
                            "phase": draw(st.sampled_from([0.0, 37.0, 90.0, 180.0, 270.0]))}
    return values


@st.composite
def steps(draw: st.DrawFn, depth: int = 0) -> dict[str, Any]:
    kinds = ["wave", "wave", "rest", "hold", "ramp", "mark"] + (["steps"] if depth < 2 else [])
    kind = draw(st.sampled_from(kinds))
    step: dict[str, Any] = {"mark": draw(marks)} if kind != "mark" else {"mark": 7}
    if kind == "wave":
        step["wave"] = "w"
        step |= draw(st.sampled_from([{"cycles": 1}, {"cycles": 3}, {"duration": 0.5}]))
        if draw(st.booleans()):
            step["current"] = draw(amps)
    elif kind == "rest":
        step["rest"] = draw(spans)
    elif kind == "hold":
        step["hold"] = {"current": draw(amps), "current_b": draw(amps), "time": draw(spans)}
    elif kind == "ramp":
        step["ramp"] = {"to": draw(amps), "to_b": draw(amps), "over": draw(spans)}
    elif kind == "steps":
        step |= {"times": draw(st.integers(1, 3)),
                 "steps": draw(st.lists(steps(depth=depth + 1), min_size=1, max_size=3))}
    if draw(st.integers(0, 5)) == 0:
        step["limits"] = {"outlet_high": 1500.0 - 100 * depth, "chamber_low": -1000.0 + 50 * depth}
    return step


schedules = st.builds(
    lambda wave, rows: Schedule(waves={"w": wave}, steps=rows),
    wave_values(), st.lists(steps(), min_size=1, max_size=4))


class Reading:
    """The schedule evaluated in time, with continuous waves sampled at the end of each tick."""

    def __init__(self, schedule: Schedule, passes: int) -> None:
        self.schedule = schedule
        self.a: list[np.ndarray] = []
        self.b: list[np.ndarray] = []
        self.now = (0.0, 0.0)
        self.ticks = 0
        self.cycles: list[int] = []
        self.marks: list[tuple[int, int]] = []
        self.block(list(schedule.steps), passes, False)

    def put(self, a: np.ndarray, b: np.ndarray) -> None:
        self.a.append(a)
        self.b.append(b)
        self.ticks += len(a)
        if len(a):
            self.now = (float(a[-1]), float(b[-1]))

    def line(self, a: float, b: float, n: int) -> None:
        share = np.arange(1, n + 1) / n
        self.put(self.now[0] + (a - self.now[0]) * share, self.now[1] + (b - self.now[1]) * share)

    def block(self, rows: list[Any], times: int, entry: bool) -> bool:
        """`entry`: a current may be left when the block begins; returns it for its end."""
        begins = entry or (times > 1 and self.leaves(rows))
        for _ in range(times):
            may = begins
            for row in rows:
                may = self.step(row, may)
        return may

    def leaves(self, rows: list[Any]) -> bool:
        for row in reversed(rows):
            if isinstance(row, MarkStep):
                continue
            if isinstance(row, NestedStep):
                return self.leaves(list(row.steps))
            return self.end_of(row)
        return False

    def end_of(self, row: Any) -> bool:
        if isinstance(row, RestStep):
            return False
        if isinstance(row, HoldStep):
            return bool(row.hold.current or row.hold.current_b)
        if isinstance(row, RampStep):
            return bool(row.ramp.to or row.ramp.to_b)
        _, b_cycle, _ = self.cycle(row)
        return bool(round(1000 * b_cycle[-1]))

    def values(self, row: WaveStep) -> dict[str, Any]:
        wave = self.schedule.waves["w"]
        names = ("current", "rise", "hold", "fall", "rest", "rate", "duty", "coil_b")
        return {n: getattr(row, n) if getattr(row, n) is not None else getattr(wave, n)
                for n in names}

    def step(self, row: Any, may: bool) -> bool:
        if row.mark is not None:
            self.marks.append((self.ticks, row.mark))
        if isinstance(row, NestedStep):
            return self.block(list(row.steps), row.times, may)
        if isinstance(row, MarkStep):
            return may
        if isinstance(row, RestStep):
            n = round(row.rest / TICK_S)
            first = min(n, DOWN_TICKS) if may else 0
            if first:
                self.line(0, 0, first)
            self.line(0, 0, n - first)
        elif isinstance(row, HoldStep):
            n = round(row.hold.time / TICK_S)
            first = min(n, round(row.hold.over / TICK_S))
            self.line(row.hold.current, row.hold.current_b, first)
            self.line(row.hold.current, row.hold.current_b, n - first)
        elif isinstance(row, RampStep):
            self.line(row.ramp.to, row.ramp.to_b, round(row.ramp.over / TICK_S))
        else:
            self.wave(row, may)
        return self.end_of(row)

    def cycle(self, row: WaveStep) -> tuple[np.ndarray, np.ndarray, float]:
        """Both coils' current at the end of each tick of one cycle, and its period in s."""
        v = self.values(row)
        if v["rate"]:
            period = 1 / v["rate"]
            top, fall = period * v["duty"], v["fall"]
        else:
            top, fall = v["rise"] + v["hold"], v["fall"]
            period = top + fall + v["rest"]
        ends = (v["rise"], top, top + fall, period)
        edges = [0, *(int(np.floor(t / TICK_S + 0.5)) for t in ends)]
        height = [0.0, 1.0, 1.0, 0.0, 0.0]
        n = edges[-1]
        other = v["coil_b"]
        b = 0.0 if other is None else v["current"] if other.current is None else other.current
        lag = 0 if other is None else int(np.floor(other.phase / 360 * n + 0.5)) % n
        k = np.arange(1, n + 1)
        return (v["current"] * np.interp(k % n, edges, height),
                b * np.interp((k - lag) % n, edges, height), period)

    def wave(self, row: WaveStep, may: bool) -> None:
        a_cycle, b_cycle, period = self.cycle(row)
        if may:
            self.line(0, 0, DOWN_TICKS)
        if round(1000 * b_cycle[-1]):
            self.line(0, float(b_cycle[-1]), DOWN_TICKS)
        cycles = row.cycles or max(
            1, int(np.floor(row.duration / period + 0.5 + 1e-9)))  # type: ignore[operator]
        for _ in range(cycles):
            self.cycles.append(self.ticks)
            self.put(a_cycle, b_cycle)


def sequenced(program: Program) -> tuple[np.ndarray, list[int], list[tuple[int, int]], list[Any]]:
    """Targets, cycle marks, marks and limits as the board's own sequencer runs them."""
    blob, crc = limits_blob(RIG)
    limits, store = Limits(), board.Program()
    limits.blob.put(0, blob, len(blob))
    assert limits.seal(len(blob), crc, b"\0" * 8)
    store.blob.put(0, program.records, len(program.records))
    assert store.seal(len(program.records), program.crc32, b"\0" * 8)
    sequencer = board.Sequencer(store, limits)
    targets = np.zeros((program.ticks, 2), np.int64)
    cycles, seen, active = [], [], []
    outlet_high = FIELDS.index("outlet_high_hard_pa")
    for tick in range(program.ticks):
        sequencer.cycle_mark, sequencer.mark = 0, -1
        assert sequencer.step() == board.RUNS
        targets[tick] = sequencer.a_ma, sequencer.b_ma
        if sequencer.cycle_mark == board.CYCLE:
            cycles.append(tick)
        if sequencer.mark >= 0:
            seen.append((tick, sequencer.mark))
        active.append(limits.active[outlet_high])
    assert sequencer.step() == board.ENDED
    return targets, cycles, seen, active


def compiled(schedule: Schedule, passes: int) -> Program:
    """Compile, or give this example up when a bound (memory, slew) refuses it."""
    try:
        return compile_program(schedule, RIG, passes)
    except ScheduleError as err:
        lawful = ("memory", "faster", "nested", "tick", "two marks")
        assume(not any(word in err.what for word in lawful))
        raise


@settings(max_examples=150, deadline=None,
          suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much])
@given(schedules, st.integers(1, 2))
def test_program_equals_its_schedule_when_read_three_ways(schedule: Schedule, passes: int) -> None:
    try:
        wanted = Reading(schedule, passes)
    except ValueError:
        assume(False)
    program = compiled(schedule, passes)
    laid = expand(program)
    targets, cycles, seen, active = sequenced(program)
    marks_wait = program.ticks - wanted.ticks       # marks in one moment wait for each other
    if len({tick for tick, _ in wanted.marks}) == len(wanted.marks):
        assert marks_wait == 0
        a = 1000 * np.concatenate([*wanted.a, np.zeros(0)])
        b = 1000 * np.concatenate([*wanted.b, np.zeros(0)])
        assert np.max(np.abs(laid.a_ma - a), initial=0) <= 1.5
        assert np.max(np.abs(laid.b_ma - b), initial=0) <= 1.5
        assert laid.cycle_starts == wanted.cycles
        assert [m for m in laid.marks if m[0] < program.ticks] == [
            m for m in wanted.marks if m[0] < program.ticks]
    assert marks_wait <= DOWN_TICKS * len(wanted.marks)
    assert [m for _, m in laid.marks] == [m for _, m in wanted.marks]
    assert np.array_equal(targets[:, 0], laid.a_ma)
    assert np.array_equal(targets[:, 1], laid.b_ma)
    assert cycles == laid.cycle_starts
    assert len(cycles) == program.cycles == passes * schedule.cycles_per_pass
    assert seen == [m for m in laid.marks if m[0] < program.ticks]
    assert len(laid.cycle_ends) == program.cycles
    assert active == in_force(laid.limits, program.ticks)


def in_force(limits: list[tuple[int, str, int]], ticks: int) -> list[int]:
    """The hard outlet limit of each tick, from the reference's events in their order."""
    rig_value = int(RIG.limits.outlet_high.hard)
    value, out, events = rig_value, [], list(limits)
    for tick in range(ticks):
        while events and events[0][0] == tick:
            _, name, new = events.pop(0)
            value = rig_value if not name else new if name == "outlet_high_hard_pa" else value
        out.append(value)
    return out


def test_shipped_schedules_read_alike_on_host_and_board() -> None:
    for path in sorted((CONFIGS / "schedules").glob("*.toml")):
        program = compile_program(load_schedule(path), RIG)
        laid = expand(program)
        targets, cycles, seen, _ = sequenced(program)
        assert np.array_equal(targets[:, 0], laid.a_ma)
        assert cycles == laid.cycle_starts
        assert seen == laid.marks


def test_long_segment_stays_within_a_milliampere_when_the_board_halves_its_numbers() -> None:
    schedule = Schedule(steps=[{"ramp": {"to": 2.0, "over": 70.0}}, {"rest": 0.1}])
    program = compile_program(schedule, RIG)
    targets, _, _, _ = sequenced(program)
    assert np.max(np.abs(targets[:, 0] - expand(program).a_ma)) <= 1
