"""Endurance runs on the twin: one run whatever happens to host and board, every cycle on record."""

from __future__ import annotations

import random
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from boards import RIG, ROOT

from lodestroke.errors import LinkError, LogbookError, Tripped
from lodestroke.flash import bundle_id_for
from lodestroke.logbook import open_logbook, reader, request_stop
from lodestroke.logbook.verify import verify
from lodestroke.rig import load_rig
from lodestroke.runner import endure, run
from lodestroke.runner.collect import Outcome
from lodestroke.schedule import load_plan, load_schedule
from lodestroke.twin.engine import TwinEngine

GO = 0x46


class Killed(BaseException):
    """Stands for SIGKILL: nothing in the host gets to do anything about it."""


class Cable:
    """The twin's port, which outlives the host that holds it; dies with it at a GO if told to."""

    def __init__(self, engine: TwinEngine) -> None:
        self.engine = engine
        self.name = engine.port.name
        self.read, self.now_s = engine.port.read, engine.port.now_s
        self.cut_before_go = False

    def write(self, data: bytes) -> None:
        if self.cut_before_go and data[:2] == bytes([0x7E, GO]):
            self.cut_before_go = False
            raise Killed
        self.engine.port.write(data)

    def close(self) -> None:
        """The board stays powered."""


class Host:
    """A bench computer with a logbook, and a board that stays when it goes."""

    def __init__(self, folder: Path, seed: int = 1, plan: str = "") -> None:
        self.rig = load_rig(RIG)
        self.plan = load_plan(plan or ROOT / "hil_configs" / "plans" / "short.toml")
        self.schedule = load_schedule(self.plan.schedule)
        self.bundle = bundle_id_for(self.rig)
        self.engine = TwinEngine(self.rig, seed, self.bundle)
        self.cable = Cable(self.engine)
        self.book = open_logbook(folder / "bench.db")

    def endure(self, resume: bool = False, **options: Any) -> dict[str, Any]:
        return endure(
            self.book,
            self.rig,
            self.plan,
            self.schedule,
            self.cable,
            self.bundle,
            resume=resume,
            **options,
        )

    def killed_at(self, cycle: int, resume: bool) -> bool:
        """Whether the host got as far as this cycle, and died there."""

        def progress(outcome: Outcome) -> None:
            if outcome.cycles_done >= cycle:
                raise Killed

        try:
            self.endure(resume, progress=progress)
        except Killed:
            return True
        return False

    def away(self, seconds: float) -> None:
        """The board goes on alone."""
        for _ in range(round(seconds / self.rig.board.tick)):
            self.engine.advance()

    def cycles(self) -> list[int]:
        return [row["cycle"] for row in reader.cycles(self.book, "r0001")]


@pytest.fixture
def host(tmp_path: Path) -> Host:
    return Host(tmp_path)


def test_a_plan_runs_to_its_target_with_all_check_ups(host: Host) -> None:
    seen: list[int] = []
    summary = host.endure(progress=lambda outcome: seen.append(outcome.cycles_done))
    assert summary["end"] == "target reached"
    assert (summary["cycles_done"], summary["target_cycles"]) == (60, 60)
    assert (summary["resumes"], summary["trips"], summary["gaps"]) == (0, [], [])
    assert host.cycles() == seen == list(range(1, 61))
    rows = reader.checkups(host.book, "r0001")
    assert [(row["after_cycle"], row["item"]) for row in rows] == [
        (after, item)
        for after in (30, 60)
        for item in ("cracking", "stroke_volume", "coil_resistance", "zero_flow")
    ]
    assert all(row["result"]["ok"] for row in rows), rows
    assert verify(host.book) == []


def test_a_check_up_finds_what_the_rig_was_built_with(tmp_path: Path) -> None:
    nominal = Host(tmp_path, seed=0)
    nominal.endure()
    found: dict[str, float] = {}
    for row in reader.checkups(nominal.book, "r0001"):
        found |= row["result"]
    assert found["coil_resistance_ohm"] == pytest.approx(
        nominal.rig.coils[0].resistance, rel=0.05
    )  # warm by a few kelvin
    assert found["outlet_cracking_pa"] == pytest.approx(
        nominal.rig.valves.outlet[0].cracking, abs=2 * found["u_outlet_cracking_pa"] + 60
    )


@pytest.mark.parametrize("seed", range(4))
def test_a_host_that_dies_again_and_again_loses_and_doubles_no_cycle(
    tmp_path: Path, seed: int
) -> None:
    chance = random.Random(seed)
    host = Host(tmp_path, seed)
    resume, kills, cycle = False, 0, 0
    while True:
        cycle += chance.randrange(1, 16)
        if not host.killed_at(cycle, resume):
            break
        resume, kills = True, kills + 1
        host.away(chance.choice([0.01, 0.3, 2.0, 4.9, 5.1, 12.0]))
    row = reader.run(host.book, "r0001")
    assert row["end"] == "target reached"
    assert row["resumes"] == kills > 0
    assert host.cycles() == list(range(1, 61))
    assert reader.gaps(host.book, "r0001") == []
    assert len(reader.checkups(host.book, "r0001")) == 8
    assert [line["id"] for line in reader.runs(host.book)] == ["r0001"]
    assert {trip["name"] for trip in reader.trips(host.book, "r0001")} <= {"host_silent"}
    assert verify(host.book) == []


def test_a_host_that_dies_before_its_go_arrives_leaves_no_gap(host: Host) -> None:
    host.cable.cut_before_go = True
    with pytest.raises(Killed):
        host.endure()
    summary = host.endure(resume=True)
    assert summary["gaps"] == []
    assert host.cycles() == list(range(1, 61))


def test_a_stop_request_ends_the_run_safe_and_a_resume_ends_it_whole(host: Host) -> None:
    def progress(outcome: Outcome) -> None:
        if outcome.cycles_done == 12:
            request_stop(host.book, "r0001")

    first = host.endure(progress=progress)
    assert first["end"] == "stop requested"
    assert 12 <= first["cycles_done"] < 20
    assert host.engine.lockstep.enable == 0
    host.engine.reboot()  # all of it is on disk: power may go
    second = host.endure(resume=True)
    assert (second["end"], second["resumes"], second["gaps"]) == ("target reached", 1, [])
    assert host.cycles() == list(range(1, 61))


def test_power_lost_while_the_host_is_away_is_one_gap_with_its_bound(host: Host) -> None:
    assert host.killed_at(17, resume=False)
    host.away(1.0)
    host.engine.reboot()
    on_disk = host.cycles()
    summary = host.endure(resume=True)
    (gap,) = summary["gaps"]
    assert gap["after_cycle"] == len(on_disk)
    # the board pumped four cycles a second for at most the second that nobody listened, and for
    # what had not been flushed; the bound may be larger, never smaller
    assert gap["unnumbered_most"] >= 1
    assert summary["end"] == "target reached"
    assert host.cycles() == list(range(1, 61))
    assert verify(host.book) == []


def test_power_lost_under_the_hosts_eyes_ends_with_a_link_error_and_one_gap(host: Host) -> None:
    def progress(outcome: Outcome) -> None:
        if outcome.cycles_done == 9 and host.engine.boots == 1:
            host.engine.reboot()

    with pytest.raises(LinkError, match="restarted"):
        host.endure(progress=progress)
    summary = host.endure(resume=True)
    assert len(summary["gaps"]) == 1
    assert host.cycles() == list(range(1, 61))


def pull(host: Host, inputs: int, at_cycle: int) -> Callable[[Outcome], None]:
    def progress(outcome: Outcome) -> None:
        if outcome.cycles_done == at_cycle:
            host.engine.lockstep.inputs = inputs

    return progress


def test_a_trip_ends_the_run_with_its_recorder_and_is_cleared_only_when_named(host: Host) -> None:
    summary = host.endure(progress=pull(host, 2, 7))
    assert summary["end"] == "tripped: cutout_open"
    assert [trip["name"] for trip in summary["trips"]] == ["cutout_open"]
    (trip,) = reader.trips(host.book, "r0001")
    recorded = reader.recorder(trip)
    assert trip["tick"] in recorded["tick"].tolist()
    assert len(recorded) >= 1250  # a second before, a quarter after, at tick rate
    host.engine.lockstep.inputs = 0
    with pytest.raises(Tripped, match="latched") as refusal:
        host.endure(resume=True)
    assert "--clear cutout_open" in refusal.value.try_
    with pytest.raises(Tripped):
        host.endure(resume=True, clear="stop_input")
    again = host.endure(resume=True, clear="cutout_open")
    assert again["end"] == "target reached"
    assert host.cycles() == list(range(1, 61))


def test_a_new_run_on_a_tripped_board_is_refused_and_leaves_no_empty_run(host: Host) -> None:
    host.endure(progress=pull(host, 2, 3))
    with pytest.raises(Tripped):
        host.endure()
    assert len(reader.runs(host.book)) == 1


def test_a_plan_may_go_on_after_trips_until_its_count_is_reached(tmp_path: Path) -> None:
    text = (ROOT / "hil_configs" / "plans" / "short.toml").read_text(encoding="utf-8")
    steady = (ROOT / "hil_configs" / "schedules" / "steady.toml").as_posix()
    path = tmp_path / "patient.toml"
    path.write_text(
        text.replace("../schedules/steady.toml", steady).replace("trips = 1 ", "trips = 3 "),
        encoding="utf-8",
    )
    host = Host(tmp_path, plan=str(path))
    pressed = {10: 1, 11: 0, 20: 1, 21: 0}

    def progress(outcome: Outcome) -> None:
        host.engine.lockstep.inputs = pressed.get(outcome.cycles_done, 0)

    summary = host.endure(
        progress=progress, say=lambda text: setattr(host.engine.lockstep, "inputs", 0)
    )
    assert summary["end"] == "target reached"
    assert [trip["name"] for trip in summary["trips"]] == ["stop_input", "stop_input"]
    assert host.cycles() == list(range(1, 61))


def test_a_resume_without_an_open_run_says_what_there_is(host: Host) -> None:
    with pytest.raises(LogbookError) as nothing:
        host.endure(resume=True)
    assert nothing.value.got == "no endurance run"
    host.endure()
    with pytest.raises(LogbookError) as done:
        host.endure(resume=True)
    assert "target reached" in done.value.got


def test_a_board_with_other_firmware_is_refused_before_anything_is_sent(host: Host) -> None:
    host.bundle = b"\x5a" * 8
    with pytest.raises(LinkError, match="other firmware") as refusal:
        host.endure()
    assert "lodestroke flash" in refusal.value.try_
    assert reader.runs(host.book) == []


def test_a_run_logs_cycles_marks_and_samples(host: Host) -> None:
    gentle = load_schedule(ROOT / "hil_configs" / "schedules" / "gentle.toml")
    summary = run(host.book, host.rig, gentle, host.cable, host.bundle)
    assert (summary["end"], summary["cycles_done"], summary["trips"]) == ("finished", 20, [])
    assert host.cycles() == list(range(1, 21))
    assert [row["mark"] for row in reader.marks(host.book, "r0001")] == [1]
    ticks = reader.samples(host.book, "r0001")["tick"]
    assert (ticks[1:] > ticks[:-1]).all()
    assert verify(host.book) == []


def test_a_run_that_trips_says_so_and_the_next_needs_its_name(host: Host) -> None:
    overdrive = load_schedule(ROOT / "hil_configs" / "schedules" / "overdrive.toml")
    summary = run(host.book, host.rig, overdrive, host.cable, host.bundle)
    assert summary["end"] == "tripped"
    assert [trip["name"] for trip in summary["trips"]] == ["outlet_reverse"]
    with pytest.raises(Tripped, match="latched"):
        run(host.book, host.rig, overdrive, host.cable, host.bundle)
    again = run(host.book, host.rig, overdrive, host.cable, host.bundle, clear="outlet_reverse")
    assert again["run"] == "r0002"


def test_cycles_of_a_killed_run_are_logged_by_whoever_comes_next(host: Host) -> None:
    gentle = load_schedule(ROOT / "hil_configs" / "schedules" / "gentle.toml")

    def progress(outcome: Outcome) -> None:
        if outcome.cycles_done == 3:
            raise Killed

    with pytest.raises(Killed):
        run(host.book, host.rig, gentle, host.cable, host.bundle, progress=progress)
    host.away(8.0)
    said: list[str] = []
    run(host.book, host.rig, gentle, host.cable, host.bundle, clear="host_silent", say=said.append)
    assert "run r0001" in said[0]
    cycles = host.cycles()
    assert cycles == list(range(1, len(cycles) + 1))
    assert len(cycles) > 10  # all that the board pumped until it missed the host
