"""The search: repeatable, shrinks, catches a rig without limits, and passes the shipped one."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from lodestroke.cli.prove import run_case
from lodestroke.prove import Case, Fault, Trace, judge, read_case, search, write_case
from lodestroke.rig import Rig, load_rig
from lodestroke.schedule import Schedule, compile_program, load_schedule
from lodestroke.virtual import available


@pytest.fixture(scope="module")
def overdrive(shipped: Path) -> Schedule:
    return load_schedule(shipped / "schedules" / "overdrive.toml")


@pytest.fixture(scope="module")
def gentle(shipped: Path) -> Schedule:
    return load_schedule(shipped / "schedules" / "gentle.toml")


@pytest.fixture(scope="module")
def good(sim: Rig, overdrive: Schedule) -> Trace:
    """A trace in which everything holds."""
    return run_case(sim, overdrive, Case())


def recording(good: Trace, into: list[Case]) -> Callable[[Case], Trace]:
    """A run that only notes its case: what the search does by itself."""

    def run(case: Case) -> Trace:
        into.append(case)
        return good

    return run


def test_a_seed_tries_the_same_cases_again_and_another_seed_others(sim: Rig, good: Trace) -> None:
    first: list[Case] = []
    again: list[Case] = []
    other: list[Case] = []
    for seed, into in ((7, first), (7, again), (8, other)):
        proof = search(sim, 9000, recording(good, into), tries=40, seed=seed)
        assert proof.broken is None
        assert proof.cases == len(into) == len(set(into))
    assert first == again
    assert first != other
    assert first[0] == Case()  # the nominal pump without a fault comes first


def test_the_search_varies_pumps_and_every_kind_of_fault(sim: Rig, good: Trace) -> None:
    seen: list[Case] = []
    proof = search(sim, 9000, recording(good, seen), tries=150)
    assert len({case.plant_seed for case in seen}) > 50
    assert set(proof.fault_kinds) == {
        "stuck", "open", "shorted", "jump", "noise", "exchanged", "stop_input", "cutout_open",
        "host_silent", "supply_sag",
    }  # fmt: skip
    assert {len(case.faults) for case in seen} == {0, 1, 2, 3}
    assert max(fault.start_tick for case in seen for fault in case.faults) <= 9000


def test_a_failure_is_shrunk_to_what_it_needs(sim: Rig, good: Trace) -> None:
    """Stand-in for a run: two ends whenever the stop input is pressed at tick 500 or later."""

    def run(case: Case) -> Trace:
        bad = any(f.kind == "stop_input" and f.start_tick >= 500 for f in case.faults)
        return replace(good, ends=good.ends * 2) if bad else good

    proof = search(sim, 9000, run, tries=200)
    assert proof.broken is not None
    assert proof.broken.invariant == "one_end"
    assert proof.case == Case(
        faults=(Fault(kind="stop_input", start_tick=500, length_ticks=1),)
    )
    assert proof.shrink_runs > 0


def test_a_run_that_does_not_come_to_its_end_is_a_failure(sim: Rig) -> None:
    def run(case: Case) -> Trace:
        raise OverflowError("small integer")

    proof = search(sim, 9000, run, tries=5)
    assert proof.broken is not None
    assert proof.broken.invariant == "run_completes"
    assert "small integer" in proof.broken.got
    assert proof.case == Case()


def test_an_interrupted_search_keeps_what_was_proved_so_far(sim: Rig, good: Trace) -> None:
    seen: list[Case] = []
    proof = search(sim, 9000, recording(good, seen), tries=50, stop=lambda: len(seen) >= 3)
    assert proof.interrupted
    assert proof.broken is None
    assert proof.cases == len(seen) == 3


def test_a_rig_without_limits_is_caught_and_its_file_replays_to_the_same(
    weak_file: Path, overdrive: Schedule, tmp_path: Path
) -> None:
    weak = load_rig(weak_file)
    ticks = compile_program(overdrive, weak).ticks
    proof = search(weak, ticks, lambda case: run_case(weak, overdrive, case), tries=4)
    assert proof.broken is not None
    assert proof.broken.invariant == "margin_stays"
    assert proof.case == Case()  # the nominal pump collapses without any fault
    case = read_case(write_case(tmp_path / "case.toml", proof.case), weak)
    assert proof.broken in judge(run_case(weak, overdrive, case))


@pytest.mark.parametrize("name", ["gentle", "overdrive"])
def test_the_shipped_rig_holds(
    name: str, sim: Rig, shipped: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    schedule = load_schedule(shipped / "schedules" / f"{name}.toml")
    ticks = compile_program(schedule, sim).ticks
    proof = search(sim, ticks, lambda case: run_case(sim, schedule, case), tries=5, seed=1)
    assert (proof.broken, proof.cases) == (None, 5)
    assert list(tmp_path.iterdir()) == []  # nothing is left in the user's folder


@pytest.mark.parametrize(
    ("kind", "channel", "magnitude", "trip", "after"),
    [
        ("open", "chamber", 0, "sensor_range", 2),  # sensor_bad: the third tick in a row
        ("shorted", "outlet", 0, "sensor_range", 2),
        ("open", "coil_a", 0, "sensor_range", 2),
        ("jump", "coil_a", 1300, "over_current", 0),
        ("jump", "outlet", 4000, "outlet_reverse", 0),
        ("noise", "coil_a", 2000, None, None),
        ("stop_input", "", 0, "stop_input", 0),
        ("cutout_open", "", 0, "cutout_open", 0),
        ("supply_sag", "", 100, "coil_open", None),
        ("stuck", "chamber", 0, "sensor_stuck", None),
    ],
)
def test_a_fault_reaches_the_board_in_its_tick(
    kind: str, channel: str, magnitude: int, trip: str | None, after: int | None, sim: Rig,
    gentle: Schedule,
) -> None:
    fault = {"kind": kind, "channel": channel, "magnitude": magnitude}
    case = Case.model_validate({"faults": [{**fault, "start_tick": 200, "length_ticks": 400}]})
    trace = run_case(sim, gentle, case)
    assert judge(trace) == []
    (found,) = trace.trips
    if trip is not None:
        assert found["name"] == trip
    if after is not None:
        assert found["tick"] == 200 + after
    assert found["tick"] >= 200


def test_a_host_that_comes_back_gets_the_trip_and_a_short_silence_none(
    sim: Rig, gentle: Schedule
) -> None:
    for ticks, expected in ((3000, []), (3800, []), (6000, ["host_silent"])):
        away = Fault(kind="host_silent", start_tick=100, length_ticks=ticks)
        trace = run_case(sim, gentle, Case(faults=(away,)))
        assert judge(trace) == []
        assert [trip["name"] for trip in trace.trips] == expected


def test_the_real_interpreter_sees_the_same_faults(sim: Rig, overdrive: Schedule) -> None:
    if available() is not None:
        pytest.skip(f"no virtual board: {available()}")
    case = Case(
        plant_seed=3,
        faults=(
            Fault(kind="noise", channel="outlet", magnitude=30, start_tick=20, length_ticks=300),
            Fault(kind="exchanged", start_tick=400, length_ticks=9),
            Fault(kind="stop_input", start_tick=700, length_ticks=1),
        ),
    )
    twin, virtual = (run_case(sim, overdrive, case, on) for on in ("twin", "virtual"))
    assert twin.samples.tobytes() == virtual.samples.tobytes()
    assert twin.wires.tobytes() == virtual.wires.tobytes()
    assert [trip["name"] for trip in twin.trips] == ["stop_input"]
