"""Verify finds each kind of damage, says which, and finds nothing in a whole logbook."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import made
import pytest

from lodestroke.errors import LogbookError
from lodestroke.logbook import Logbook, Writer, new_run, open_logbook
from lodestroke.logbook.verify import verify


@pytest.fixture
def run(log: Logbook) -> str:
    """A whole, finished run of 60 cycles and 4 chunks."""
    return made.finished_run(log)


def damage(path: Path, *statements: str) -> None:
    """Do to the file what no writer of ours would."""
    with sqlite3.connect(path) as connection:
        for statement in statements:
            assert connection.execute(statement).rowcount > 0, statement
    connection.close()


def test_verify_finds_nothing_in_a_whole_logbook(log: Logbook, run: str) -> None:
    new_run(log, "run")
    assert verify(log) == []
    assert verify(log, run) == []


SWAP = "create temp table kept as select data d, sha256 s from chunks where number = 1"
DAMAGE = {
    "a chunk's byte flipped": (
        "update chunks set data = cast(substr(data, 1, 900) || x'5a5b' || substr(data, 903) as blob)"
        " where number = 2",
        "chunk 2 of the samples: ",
    ),
    "a chunk deleted": (
        "delete from chunks where number = 2",
        "chunk 2 of the samples is missing",
    ),
    "the last chunk deleted": (
        "delete from chunks where number = 4",
        "4 chunks of samples were written, the last is 3",
    ),
    "a chunk's ticks changed": (
        "update chunks set first_tick = first_tick + 1 where number = 2",
        "chunk 2 of the samples: its ticks are not those",
    ),
    "a cycle deleted": (
        "delete from cycles where cycle = 30",
        "cycles missing without a gap on record: 30",
    ),
    "the last cycles deleted": (
        "delete from cycles where cycle > 55",
        "60 cycles were written, 55 are there",
    ),
    "a cycle's figure changed": (
        "update cycles set outlet_max_pa = outlet_max_pa + 1 where cycle = 12",
        "cycles altered since they were written: 12",
    ),
    "a cycle renumbered": (
        "update cycles set cycle = 61 where cycle = 60",
        "cycles missing without a gap on record: 60",
    ),
    "a trip deleted": ("delete from trips", "1 trips were written, 0 are there"),
    "a trip's limit changed": (
        'update trips set "limit" = 9999',
        "trips altered since they were written",
    ),
    "a recorder damaged": (
        "update trips set recorder = substr(recorder, 1, 40)",
        "flight recorder of trip ",
    ),
    "a gap deleted": ("delete from gaps", "1 gaps were written, 0 are there"),
    "a check-up changed": (
        "update checkups set result = '{\"ok\": true, \"outlet_cracking_pa\": 201.5}'",
        "checkups altered since they were written",
    ),
    "a note changed": ("update notes set text = 'x'", "notes altered since they were written"),
    "the summary changed": (
        "update runs set summary = '{\"cycles_done\": 61}'",
        "its summary counts 61 cycles, its rows 60",
    ),
    "the rig's text changed": (
        "update runs set sources = '{\"rig\": \"x\"}'",
        "the kept rig file is not the one that was run",
    ),
    "a row of no run": (
        "update marks set run = 'r0999'",
        "rows of marks belong to a run that is not there",
    ),
}


@pytest.mark.parametrize("kind", DAMAGE)
def test_verify_finds(log: Logbook, run: str, path: Path, kind: str) -> None:
    statement, words = DAMAGE[kind]
    damage(path, statement)
    problems = verify(log)
    assert any(words in problem for problem in problems), problems
    assert kind == "a row of no run" or all(run in problem for problem in problems)


def test_verify_finds_two_chunks_swapped(log: Logbook, run: str, path: Path) -> None:
    damage(
        path,
        "update chunks set number = -1 where number = 1",
        "update chunks set number = 1 where number = 2",
        "update chunks set number = 2 where number = -1",
    )
    problems = verify(log)
    assert any("chunk 1 of the samples is not the one that followed here" in p for p in problems)


def test_verify_finds_a_chunk_taken_from_another_run(log: Logbook, run: str, path: Path) -> None:
    """Even the first one, with all its sums, and a run that remembers as many."""
    other = made.finished_run(log, rows=9_000)
    damage(
        path,
        f"delete from chunks where run = '{other}' and number = 1",
        f"update chunks set run = '{other}' where run = '{run}' and number = 1",
    )
    problems = verify(log, other)
    assert any("chunk 1 of the samples is not the one that followed" in p for p in problems)


def test_verify_excuses_cycles_that_a_gap_tells(log: Logbook) -> None:
    run = new_run(log, "endure")
    with Writer(log, run) as writer:
        for number in (1, 2, 6):
            writer.cycle(made.cycle(number))
        writer.gap(2, "the board's ring was full", 3, 4)
        writer.flush()
        assert verify(log) == [f"run {run}: cycles missing without a gap on record: 5"]
        writer.gap(2, "the board's ring was full", 5, 5)
        writer.flush()
    assert verify(log) == []


def test_logbook_cut_short_is_told_and_never_read_as_whole(path: Path) -> None:
    with open_logbook(path) as log:
        made.finished_run(log)
    size = path.stat().st_size
    for part in (0.9, 0.6, 0.3, 0.05):
        with path.open("r+b") as file:
            file.truncate(int(size * part))
        try:
            with open_logbook(path, create=False) as log:
                assert verify(log)
        except LogbookError as fault:
            assert fault.got
            assert fault.try_
