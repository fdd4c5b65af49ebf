"""Check-ups are ordinary, gentle schedules of at most two seconds, for any rig."""

from __future__ import annotations

from typing import Any

import pytest

from lodestroke.errors import ScheduleError
from lodestroke.rig import Rig
from lodestroke.schedule import checkup_schedule, compile_program
from lodestroke.schedule.checkups import MARKS
from lodestroke.schedule.expand import expand


def weak(rig: Rig) -> Rig:
    """A slow, hot coil behind a small supply, with little duty allowed."""
    coil = rig.coils[0].model_copy(update={
        "inductance": 1.0, "winding_heat": 0.05, "body_heat": 0.5, "winding_to_body": 60.0})
    return rig.model_copy(update={
        "coils": [coil], "limits": rig.limits.model_copy(update={"duty_cycle": 0.05})})


@pytest.mark.parametrize("item", sorted(MARKS))
@pytest.mark.parametrize("change", [lambda rig: rig, weak])
def test_checkup_is_short_bounded_and_makes_no_cycle(bench: Rig, item: str, change: Any) -> None:
    rig = change(bench)
    schedule = checkup_schedule(item, rig)
    program = compile_program(schedule, rig)
    laid = expand(program)
    assert program.ticks * rig.board.tick <= 2.0
    assert program.cycles == 0
    assert [mark for _, mark in laid.marks] == [MARKS[item]]
    assert laid.a_ma.max(initial=0) <= 400 * rig.limits.current
    assert laid.a_ma[-1] == 0
    assert schedule.cycles_per_pass == 0


def test_cracking_checkup_ramps_up_and_down_slowly(bench: Rig) -> None:
    a_ma = expand(compile_program(checkup_schedule("cracking", bench), bench)).a_ma
    top = int(a_ma.argmax())
    assert (a_ma[: top + 1][1:] >= a_ma[:top]).all()
    assert (a_ma[top + 1:] <= a_ma[top:-1]).all()
    assert abs(int(max(abs(a_ma[1:] - a_ma[:-1])))) <= 2


def test_unknown_checkup_is_refused(bench: Rig) -> None:
    with pytest.raises(ScheduleError, match="no such check-up") as caught:
        checkup_schedule("flow", bench)
    assert "cracking" in caught.value.bound
