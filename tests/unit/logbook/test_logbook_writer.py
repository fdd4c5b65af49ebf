"""Writing and reading back: nothing lost, nothing doubled, one writer a run."""

from __future__ import annotations

import math
import subprocess
import sys
from pathlib import Path

import made
import numpy as np
import pytest

from lodestroke.errors import LogbookError
from lodestroke.logbook import Logbook, Writer, lease, new_run, open_logbook, reader
from lodestroke.logbook.verify import verify


def test_run_reads_back_as_it_was_written(log: Logbook) -> None:
    run = made.finished_run(log)
    assert [row["cycle"] for row in reader.cycles(log, run)] == list(range(1, 61))
    tenth = reader.cycles(log, run, after=9, most=1)[0]
    assert {name: tenth[name] for name in made.CYCLE_FIELDS} == made.cycle(10)
    assert [row["name"] for row in reader.trips(log, run)] == ["outlet_reverse"]
    assert reader.checkups(log, run)[0]["result"] == {"ok": True, "outlet_cracking_pa": 301.5}
    assert reader.marks(log, run)[0]["mark"] == 4
    assert reader.gaps(log, run)[0]["unnumbered_most"] == 3
    assert reader.notes(log, run)[0]["text"] == "a note, with a comma"
    row = reader.run(log, "last")
    assert (row["id"], row["end"], row["summary"]["cycles_done"]) == (run, "stopped", 60)
    assert row["sources"]["rig"].startswith((made.CONFIGS / "bench-sim.toml").read_text()[:40])


def test_samples_read_back_to_the_last_integer_over_several_chunks(log: Logbook) -> None:
    run = made.finished_run(log, rows=20_000)
    found = reader.samples(log, run)
    assert found.tobytes() == made.samples(20_000) + made.samples(500)
    parts = [(row["segment"], row["rows"]) for row, _ in reader.sample_chunks(log, run)]
    assert parts == [(1, 8192), (1, 8192), (1, 3616), (2, 500)]
    recorder = reader.recorder(reader.trips(log, run)[0])
    assert np.array_equal(recorder["tick"], np.arange(1280))


def test_flush_answers_the_highest_entry_that_another_process_can_read(
    log: Logbook, path: Path
) -> None:
    run = new_run(log, "run")
    with Writer(log, run) as writer:
        writer.begin(made.NONCE, 0, 1)
        writer.cycle(made.cycle(1, entry=5))
        writer.seen(9)
        assert writer.flushed_entry == 0
        assert writer.flush() == 9
        look = f"import sqlite3; print(sqlite3.connect({str(path)!r}).execute(" \
               "'select max(entry) from cycles').fetchone()[0])"
        found = subprocess.run([sys.executable, "-c", look], capture_output=True, check=True)
        assert int(found.stdout) == 5


def test_small_flush_writes_the_journal_and_holds_samples_back(log: Logbook) -> None:
    run = new_run(log, "run")
    with Writer(log, run) as writer:
        writer.cycle(made.cycle(1))
        writer.samples(made.samples(10))
        assert writer.flush(whole=False) == 1
        assert len(reader.cycles(log, run)) == 1
        assert len(reader.samples(log, run)) == 0
        writer.flush()
        assert len(reader.samples(log, run)) == 10


def test_everything_resent_after_a_crash_is_there_once(log: Logbook) -> None:
    run = new_run(log, "endure")
    for _ in range(3):  # three hosts in turn, each sent the same by a board that was not acknowledged
        with Writer(log, run) as writer:
            writer.begin(made.NONCE, 0, 1)
            for number in (1, 2, 3, 3, 2):
                writer.cycle(made.cycle(number))
            writer.mark({"entry": 4, "tick": 9, "mark": 1, "step": 0})
            writer.trip(made.trip(5), recorder=made.samples(4))
            writer.gap(3, "the board's ring was full", 4, 6)
            writer.checkup(3, "cracking", {"ok": True, "inlet_cracking_pa": 300.0})
            assert writer.flush() == 5
    counted = {"cycles": 3, "marks": 1, "trips": 1, "gaps": 1, "checkups": 1}
    assert reader.run(log, run)["counts"] == counted
    assert {name: len(getattr(reader, name)(log, run)) for name in counted} == counted
    assert verify(log) == []


def test_same_entry_of_a_board_that_booted_anew_is_another_mark(log: Logbook) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        for nonce in (1, 2):
            writer.begin(nonce, 0, nonce)
            writer.mark({"entry": 4, "tick": 9, "mark": 1, "step": 0})
        writer.flush()
    assert len(reader.marks(log, run)) == 2


def test_cycle_that_comes_again_with_other_figures_is_told_and_the_first_kept(log: Logbook) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        writer.cycle(made.cycle(1))
        writer.flush()
        for _ in range(3):
            writer.cycle(made.cycle(1) | {"chamber_max_pa": -5})
            writer.flush()
    assert reader.cycles(log, run)[0]["chamber_max_pa"] == made.cycle(1)["chamber_max_pa"]
    problems = verify(log)
    assert len(problems) == 1
    assert "chamber_max_pa (104, then -5)" in problems[0]


def test_cycle_that_lacks_a_field_is_refused_before_it_is_buffered(log: Logbook) -> None:
    with Writer(log, new_run(log, "run")) as writer:
        row = made.cycle(1)
        del row["coil_peak_ma"]
        with pytest.raises(ValueError, match="coil_peak_ma"):
            writer.cycle(row)
        assert writer.flush() == 0


def test_checkup_with_a_figure_that_is_not_finite_is_kept_as_nothing(log: Logbook) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        writer.checkup(10, "zero_flow", {"ok": False, "flow_ul": math.nan, "u": np.float64(2.5)})
        writer.flush()
    assert reader.checkups(log, run)[0]["result"] == {"ok": False, "flow_ul": None, "u": 2.5}
    assert verify(log) == []


def test_resume_state_and_count_are_on_disk_for_the_next_host(log: Logbook, path: Path) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        writer.resume_state({"nonce": 7, "token": 8, "segment": 2})
        writer.flush()
        writer.finish("interrupted", {"cycles_done": 0})
    with open_logbook(path) as again, Writer(again, run) as writer:
        writer.resumed()
        row = reader.run(again, run)
    assert row["resume"] == {"nonce": 7, "token": 8, "segment": 2}
    assert (row["resumes"], row["ended"], row["end"]) == (1, None, None)


def test_second_writer_of_a_run_is_refused_and_told_who_has_it(log: Logbook) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        with pytest.raises(LogbookError, match="another process is writing") as caught:
            Writer(log, run)
        assert writer.owner in caught.value.got
    Writer(log, run).release()


def test_lease_of_a_process_that_died_is_taken_over_at_once(log: Logbook, path: Path) -> None:
    run = new_run(log, "endure")
    hold = "import os, sys; from lodestroke.logbook import *; " \
           f"Writer(open_logbook({str(path)!r}), {run!r}); os._exit(0)"
    subprocess.run([sys.executable, "-c", hold], check=True)
    assert reader.run(log, run)["lease_owner"]
    with Writer(log, run) as writer:
        assert writer.flush() == 0


def test_stale_lease_of_another_machine_is_taken_over_and_the_old_writer_stopped(
    log: Logbook, monkeypatch: pytest.MonkeyPatch
) -> None:
    run = new_run(log, "endure")
    monkeypatch.setattr(lease, "LEASE_S", -1.0)
    old = Writer(log, run)
    monkeypatch.setattr(lease, "LEASE_S", 15.0)
    with Writer(log, run) as new:
        old.cycle(made.cycle(1))
        with pytest.raises(LogbookError, match="taken this run over"):
            old.flush()
        new.cycle(made.cycle(2) | {"cycle": 1})
        new.flush()
        old.release()  # gives back nothing that is not its own
        assert reader.run(log, run)["lease_owner"] == new.owner
    assert len(reader.cycles(log, run)) == 1


def test_writer_of_a_run_that_is_not_there_is_refused(log: Logbook) -> None:
    with pytest.raises(LogbookError, match="no such run"):
        Writer(log, "r0099")


def test_run_of_an_unknown_kind_is_refused(log: Logbook) -> None:
    with pytest.raises(ValueError, match="dry-run, run, endure"):
        new_run(log, "play")


_TWO = """
import sys
from made import cycle, samples
from lodestroke.logbook import Writer, new_run, open_logbook
log = open_logbook(sys.argv[1])
for _ in range(5):
    run = new_run(log, "run")
    print(run)
    with Writer(log, run) as writer:
        for number in range(1, 41):
            writer.cycle(cycle(number))
            writer.samples(samples(50, number * 50))
            if number % 4 == 0:
                writer.flush()
"""


def test_two_processes_write_their_own_runs_at_once(path: Path) -> None:
    """Both make the file, too: whoever comes second finds it made."""
    both = [
        subprocess.Popen(
            [sys.executable, "-c", _TWO, str(path)], stdout=subprocess.PIPE, text=True,
            cwd=Path(__file__).parent,
        )
        for _ in range(2)
    ]
    ids = [run for process in both for run in process.communicate(timeout=60)[0].split()]
    assert [process.returncode for process in both] == [0, 0]
    assert sorted(ids) == [f"r{number:04d}" for number in range(1, 11)]
    with open_logbook(path) as log:
        assert verify(log) == []
        assert {len(reader.cycles(log, run)) for run in ids} == {40}


def test_stop_request_is_seen_until_it_is_cleared(log: Logbook) -> None:
    from lodestroke.logbook import clear_requests, request_stop, stop_requested

    run = new_run(log, "endure")
    assert not stop_requested(log, run)
    request_stop(log, "last")
    assert stop_requested(log, run)
    clear_requests(log, run)
    assert not stop_requested(log, run)
    with pytest.raises(LogbookError, match="no such run"):
        request_stop(log, "r0077")


@pytest.mark.parametrize("name", ["r0002", "2", "r2", "R0002", "last"])
def test_run_is_found_by_its_id_its_number_and_last(log: Logbook, name: str) -> None:
    new_run(log, "run")
    new_run(log, "run")
    assert reader.resolve(log, name) == "r0002"


def test_unknown_run_is_answered_with_the_nearest_and_the_newest(log: Logbook) -> None:
    with pytest.raises(LogbookError) as caught:
        reader.resolve(log, "last")
    assert "empty" in caught.value.bound
    for _ in range(12):
        new_run(log, "run")
    with pytest.raises(LogbookError) as caught:
        reader.resolve(log, "r0001x")
    assert caught.value.got == "r0001x"
    assert {"last", "r0001", "r0012"} <= set(caught.value.bound.split(", "))
