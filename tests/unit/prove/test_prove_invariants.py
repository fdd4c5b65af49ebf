"""Each invariant holds on a real trace, and breaks on the same trace doctored."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from lodeboard import states
from lodestroke.cli.prove import run_case
from lodestroke.prove import INVARIANTS, Case, Fault, Trace, judge
from lodestroke.rig import Rig
from lodestroke.schedule import load_schedule


@pytest.fixture(scope="module")
def tripped(sim: Rig, shipped: Path) -> Trace:
    """Overdrive, stopped by a category 0 trip."""
    schedule = load_schedule(shipped / "schedules" / "overdrive.toml")
    return run_case(sim, schedule, Case(plant_seed=1))


@pytest.fixture(scope="module")
def pressed(sim: Rig, shipped: Path) -> Trace:
    """Gentle strokes, stopped by the stop input while current flows: category 1."""
    schedule = load_schedule(shipped / "schedules" / "gentle.toml")
    press = Fault(kind="stop_input", start_tick=200, length_ticks=5)
    return run_case(sim, schedule, Case(faults=(press,)))


def rows_with(trace: Trace, tick: int, **values: int) -> Trace:
    """The trace with fields of the sample of one tick set anew."""
    samples = trace.samples.copy()
    for name, value in values.items():
        samples[name][samples["tick"] == tick] = value
    return replace(trace, samples=samples)


def wires_with(trace: Trace, ticks: slice, **values: Any) -> Trace:
    """The trace with what the wires carried set anew."""
    wires = trace.wires.copy()
    for name, value in values.items():
        wires[name][ticks] = value
    return replace(trace, wires=wires)


def broken(trace: Trace) -> set[str]:
    return {found.invariant for found in judge(trace)}


def test_wires_and_samples_tell_of_the_same_ticks(tripped: Trace) -> None:
    n = len(tripped.samples) - 1
    assert tripped.wires["tick"].tolist() == list(range(len(tripped.wires)))
    assert tripped.wires["duty_a_q15"][:n].tolist() == tripped.samples["duty_a_q15"][:n].tolist()


def test_all_hold_after_trips_of_both_categories(tripped: Trace, pressed: Trace) -> None:
    assert judge(tripped) == []
    assert judge(pressed) == []
    assert [trip["stop_category"] for trip in tripped.trips + pressed.trips] == [0, 1]
    assert pressed.trips[0]["tick"] == 200


DOCTORED: dict[str, Callable[[Trace], Trace]] = {
    "enable stays on after the trip": lambda t: wires_with(
        t, slice(t.trips[0]["tick"] + 60, None), enable=1
    ),
    "drive in a safe state": lambda t: rows_with(t, 9, state=states.SAFE, duty_a_q15=50),
    "current that does not decay": lambda t: wires_with(t, slice(-100, None), current_a=0.5),
}


@pytest.mark.parametrize("how", DOCTORED)
def test_current_only_while_allowed_breaks(how: str, pressed: Trace) -> None:
    assert "current_only_while_allowed" in broken(DOCTORED[how](pressed))


@pytest.mark.parametrize(
    ("field", "limit", "more"),
    [
        ("chamber_pa", "chamber_high_hard_pa", 0),
        ("chamber_pa", "chamber_low_hard_pa", 0),
        ("outlet_pa", "outlet_high_hard_pa", 0),
        ("outlet_pa", "outlet_low_hard_pa", 0),
        ("coil_a_ma", "over_current_ma", 0),
        ("coil_b_ma", "over_current_ma", 0),
    ],
)
def test_a_crossed_limit_in_a_driven_sample_breaks(
    field: str, limit: str, more: int, pressed: Trace
) -> None:
    assert pressed.samples["state"][100] == states.RUNNING
    over = rows_with(pressed, 100, **{field: pressed.limits[limit] + more})
    assert broken(over) == {"crossed_limit_ends_running"}
    (found,) = judge(over)
    assert found.tick == 100


def test_a_hot_coil_in_a_driven_sample_breaks(pressed: Trace) -> None:
    hot = rows_with(pressed, 100, winding_cc=pressed.limits["hot_hard_mc"] // 10)
    assert broken(hot) == {"crossed_limit_ends_running"}


def test_a_target_after_a_category_0_trip_breaks(tripped: Trace) -> None:
    late = rows_with(tripped, tripped.trips[0]["tick"] + 3, target_a_ma=1)
    assert broken(late) == {"category_0_drops_at_once"}


def test_enable_with_the_cutout_open_breaks(pressed: Trace) -> None:
    assert broken(wires_with(pressed, slice(50, 51), inputs=2)) == {"open_cutout_drops_enable"}


def test_a_margin_below_zero_breaks_unless_a_pressure_was_hidden_before(pressed: Trace) -> None:
    lost = wires_with(pressed, slice(150, None), min_margin_pa=-1.0)
    assert broken(lost) == {"margin_stays"}
    for start, expected in ((150, set()), (151, {"margin_stays"})):
        hidden = Fault(kind="jump", channel="outlet", magnitude=-99, start_tick=start,
                       length_ticks=1)
        case = Case(faults=(*pressed.case.faults, hidden))
        assert broken(replace(lost, case=case)) == expected


def test_a_coil_beyond_its_limit_breaks_unless_its_current_was_hidden(pressed: Trace) -> None:
    hot = replace(pressed, truth={**pressed.truth, "peak_coil_c": 115.1})
    assert broken(hot) == {"coil_stays_cool"}
    hidden = Fault(kind="noise", channel="coil_a", magnitude=9, start_tick=1, length_ticks=1)
    assert broken(replace(hot, case=Case(faults=(hidden,)))) == set()


def test_a_hole_or_a_double_in_the_cycles_breaks_and_a_told_gap_does_not(tripped: Trace) -> None:
    n = [row["cycle"] for row in tripped.cycles]
    assert n == list(range(1, len(n) + 1))
    assert len(n) >= 3
    hole = replace(tripped, cycles=tripped.cycles[:1] + tripped.cycles[2:])
    assert broken(hole) == {"cycles_have_no_hole"}
    assert broken(replace(hole, gaps=[(2, 2)])) == set()
    assert broken(replace(tripped, cycles=[*tripped.cycles, tripped.cycles[0]])) == {
        "cycles_have_no_hole"
    }


def test_two_ends_none_or_two_trips_break(tripped: Trace) -> None:
    assert broken(replace(tripped, ends=tripped.ends * 2)) == {"one_end"}
    assert broken(replace(tripped, ends=[])) == {"one_end"}
    assert broken(replace(tripped, trips=tripped.trips * 2)) == {"one_end"}


def test_every_invariant_says_what_it_promises() -> None:
    assert all(hold.__doc__ for hold in INVARIANTS)
    assert len({hold.__name__ for hold in INVARIANTS}) == len(INVARIANTS)


def test_a_trace_of_nothing_but_an_end_breaks_nothing(pressed: Trace) -> None:
    end = {"tick": 0, "cycle": 0, "why": 2}
    assert broken(replace(pressed, samples=pressed.samples[:0], wires=pressed.wires[:0],
                          trips=[], ends=[end])) == set()
    assert not np.any(pressed.samples["tick"] < 0)
