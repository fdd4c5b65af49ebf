"""Compiled programs: the records of known schedules, by hand, and what is refused."""

from __future__ import annotations

import zlib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from lodeboard import program as board
from lodeboard.limits import FIELDS
from lodestroke.errors import ScheduleError
from lodestroke.rig import Rig
from lodestroke.schedule import Schedule, compile_program, load_schedule

CONFIGS = Path(__file__).parents[3] / "hil_configs"
Write = Callable[..., Path]
SOFT = {"rise": 0.02, "hold": 0.08, "fall": 0.02, "rest": 0.13, "current": 1.0}


def schedule(*steps: dict[str, Any], **wave: Any) -> Schedule:
    return Schedule(waves={"w": {**SOFT, **wave}}, steps=list(steps))


def limited(rig: Rig, **values: Any) -> Rig:
    return rig.model_copy(update={"limits": rig.limits.model_copy(update=values)})


def refusal(plan: Schedule, rig: Rig, passes: int = 1) -> ScheduleError:
    with pytest.raises(ScheduleError) as caught:
        compile_program(plan, rig, passes)
    assert caught.value.got
    assert caught.value.bound
    assert caught.value.try_
    return caught.value


def test_gentle_schedule_compiles_to_the_records_written_by_hand(bench: Rig) -> None:
    program = compile_program(load_schedule(CONFIGS / "schedules" / "gentle.toml"), bench)

    def strokes(step: int) -> list[tuple[int, ...]]:
        return [(board.LOOP, 0, step, 0, 0, 10), (board.CYCLE, 0, step, 0, 0, 0),
                (board.SEG, 0, step, 1200, 0, 80), (board.SEG, 0, step, 1200, 0, 170),
                (board.SEG, 0, step, 0, 0, 80), (board.SEG, 0, step, 0, 0, 170),
                (board.NEXT, 0, step, 0, 0, 0), (board.CLOSE, 0, step, 0, 0, 0)]

    assert program.rows() == [
        *strokes(0), (board.SEG, 0, 1, 0, 0, 500), (board.MARK, 0, 2, 0, 0, 1), *strokes(2),
        (board.END, 0, 0, 0, 0, 0)]
    assert program.steps == ["prime", "settle", "pump"]
    assert (program.cycles, program.ticks) == (20, 10500)
    assert program.crc32 == zlib.crc32(program.records)


def test_passes_wrap_the_whole_and_multiply_cycles(bench: Rig) -> None:
    program = compile_program(schedule({"wave": "w", "cycles": 4}), bench, passes=25)
    assert program.rows()[0][5] == 25
    assert (program.cycles, program.ticks) == (100, 25_000)


def test_rounding_to_ticks_does_not_add_up(bench: Rig) -> None:
    # 1.4 ms each: edges at 1.4, 2.8, 4.2 and 5.6 ms round to ticks 1, 3, 4 and 6
    quick = bench.coils[0].model_copy(update={"inductance": 1e-4})
    slow = bench.model_copy(update={"coils": [quick]})
    plan = schedule({"wave": "w", "cycles": 1}, rise=0.0014, hold=0.0014, fall=0.0014, rest=0.0018)
    lengths = [row[5] for row in compile_program(plan, slow).rows() if row[0] == board.SEG]
    assert lengths == [1, 2, 1, 2]


def test_second_coil_lags_by_its_phase(bench: Rig) -> None:
    two = bench.model_copy(update={
        "coils": [bench.coils[0]] * 2,
        "sensors": bench.sensors.model_copy(update={"coil_b": bench.sensors.coil_a})})
    plan = schedule({"wave": "w", "cycles": 2}, coil_b={"current": 0.5, "phase": 180.0})
    program = compile_program(plan, two)
    segments = [row[3:] for row in program.rows() if row[0] == board.SEG]
    # a: 0-20-100-120-250 ms; b the same 125 ms later: 125-145-225-245
    assert segments == [(1000, 0, 20), (1000, 0, 80), (0, 0, 20), (0, 0, 5), (0, 500, 20),
                        (0, 500, 80), (0, 0, 20), (0, 0, 5)]


def test_lagging_coil_is_brought_up_before_the_first_cycle(bench: Rig) -> None:
    two = bench.model_copy(update={
        "coils": [bench.coils[0]] * 2,
        "sensors": bench.sensors.model_copy(update={"coil_b": bench.sensors.coil_a})})
    plan = schedule({"wave": "w", "cycles": 2}, coil_b={"phase": 270.0})
    rows = compile_program(plan, two).rows()
    assert rows[0][0] == board.SEG
    assert rows[0][3:] == (0, 1000, 10)
    assert rows[1][0] == board.LOOP


def test_step_limits_are_records_and_are_relaxed_behind_it(bench: Rig) -> None:
    plan = schedule({"wave": "w", "cycles": 1, "limits": {"outlet_high": 1800.0}},
                    {"wave": "w", "cycles": 1})
    rows = compile_program(plan, bench).rows()
    tight = [(FIELDS[row[1]], row[5]) for row in rows if row[0] == board.LIMIT]
    hard, soft = bench.limits.outlet_high.hard, bench.limits.outlet_high.soft
    assert dict(tight)["outlet_high_hard_pa"] == 1800
    assert dict(tight)["outlet_high_soft_pa"] == pytest.approx(1800 * soft / hard, abs=2)
    assert [row[0] for row in rows].count(board.RELAX) == 1


def test_inner_limits_give_way_to_outer_ones(bench: Rig) -> None:
    inner = {"wave": "w", "cycles": 1, "limits": {"outlet_high": 1000.0}}
    plan = schedule({"steps": [inner, {"wave": "w", "cycles": 1}],
                     "limits": {"outlet_high": 1500.0}})
    rows = compile_program(plan, bench).rows()
    hard = FIELDS.index("outlet_high_hard_pa")
    assert [row[5] if row[0] == board.LIMIT else "relax" for row in rows
            if row[0] == board.RELAX or (row[0] == board.LIMIT and row[1] == hard)
            ] == [1500, 1000, "relax", 1500, "relax"]
    inner["limits"] = {"outlet_high": 1600.0}
    looser = schedule({"steps": [inner], "limits": {"outlet_high": 1500.0}})
    assert refusal(looser, bench).bound == "at most 1.5 kPa"


def test_two_marks_in_one_moment_wait_a_tick(bench: Rig) -> None:
    program = compile_program(schedule({"mark": 1}, {"mark": 2, "rest": 0.5}), bench)
    assert [row[0] for row in program.rows()] == [
        board.MARK, board.SEG, board.MARK, board.SEG, board.END]
    assert program.ticks == 501


def test_two_marks_in_one_moment_are_refused_while_a_current_may_flow(bench: Rig) -> None:
    hold = {"hold": {"current": 0.5, "time": 0.2}}
    error = refusal(schedule(hold, {"mark": 1}, {"mark": 2}, {"rest": 0.5}), bench)
    assert "two marks in one moment" in error.what
    compile_program(schedule(hold, {"mark": 1}, {"rest": 0.5}, {"mark": 2}), bench)


# Static bounds: (steps, wave, changes of the limits, words, number that must be told)
STROKE = {"wave": "w", "cycles": 4, "name": "s"}
BOUNDS = [
    ([STROKE], {"current": 3.5}, {}, "the current is over the limit", "3 A (limits.current)"),
    ([STROKE], {"hold": 0.4, "rest": 0.0, "current": 2.5}, {}, "duty is over", "0.6"),
    ([{"hold": {"current": 2.5, "time": 1.0}}], {}, {}, "the step's duty is over", "0.6"),
    ([{**STROKE, "cycles": 4000}], {"current": 2.5}, {}, "the coil would get too hot", "105 degC"),
    ([STROKE], {"rise": 0.001, "current": 2.9}, {}, "changes faster than supply", "at least"),
    ([STROKE], {"rise": 0.0001}, {}, "rise is shorter than a tick", "at least 1 ms"),
    ([STROKE], {"current": -1.0}, {}, "half bridge cannot reverse", "at least 0 A"),
    ([STROKE], {"coil_b": {"phase": 90.0}}, {}, "a second coil and the rig has one", "one coil"),
    ([STROKE], {"rest": 400.0}, {}, "too long for the board's sums", "at most"),
    ([{**STROKE, "limits": {"current": 0.9}}], {}, {}, "the current is over the limit", "900 mA"),
    ([{**STROKE, "limits": {"chamber_low": -9000.0}}], {}, {}, "looser than the one", "at least"),
    ([{"rest": 1.0}] * 200 + [STROKE] * 50, {}, {}, "does not fit the board's memory", "512"),
    ([{"rest": 500000.0}] * 2, {}, {}, "the program is too long", "s"),
]


@pytest.mark.parametrize("case", BOUNDS, ids=lambda case: case[3])
def test_static_bound_refuses_with_numbers(
    bench: Rig, case: tuple[list[Any], dict[str, Any], dict[str, Any], str, str]
) -> None:
    steps, wave, limits, words, bound = case
    error = refusal(schedule(*steps, **wave), limited(bench, **limits))
    assert words in error.what
    assert bound in error.bound


def test_loops_nested_too_deeply_are_refused(bench: Rig) -> None:
    step: dict[str, Any] = {"wave": "w", "cycles": 2}
    for _ in range(6):
        step = {"times": 2, "steps": [step]}
    assert "nested too deeply" in refusal(schedule(step), bench).what


def test_too_many_steps_are_refused(bench: Rig) -> None:
    plan = schedule(*[{"steps": [{"rest": 1.0}] * 100}] * 3)
    assert "too many steps" in refusal(plan, bench).what


def test_refusal_names_file_line_and_step(write: Write, bench: Rig) -> None:
    path = write('[[steps]]\nname = "far"\nwave = "soft"\ncycles = 1\ncurrent = "9 A"\n')
    with pytest.raises(ScheduleError) as caught:
        compile_program(load_schedule(path), bench)
    assert caught.value.at == "s.toml, line 8, step 'far'"


def test_duty_refusal_says_a_rest_that_passes(bench: Rig) -> None:
    error = refusal(schedule(STROKE, hold=0.4, rest=0.1, current=2.9), bench)
    rest_s = float(error.try_.split("at least ")[1].split(" ms")[0]) / 1000
    compile_program(schedule(STROKE, hold=0.4, rest=rest_s + 0.001, current=2.9), bench)
