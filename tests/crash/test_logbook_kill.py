"""The logbook when its writer is killed, its disk is full, or its write-ahead log is cut short.

What flush() answered is on disk: that holds through all of it.
"""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import log_child
import pytest

from lodestroke.errors import LogbookError
from lodestroke.logbook import Writer, new_run, open_logbook, reader
from lodestroke.logbook.verify import verify


def start(place: Path) -> subprocess.Popen[str]:
    """The writing process."""
    return subprocess.Popen(
        [sys.executable, log_child.__file__, str(place)],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True,
    )


def acknowledged(lines: str) -> int:
    """The last number of a whole line, 0 for none."""
    whole = lines[: lines.rfind("\n") + 1].split()
    return int(whole[-1]) if whole else 0


def kill(process: subprocess.Popen[str]) -> str:
    """SIGKILL; everything that it said before."""
    process.send_signal(signal.SIGKILL)
    said = process.communicate()[0]
    assert process.returncode == -signal.SIGKILL
    return said


def check_whole(place: Path, at_least: int) -> int:
    """Every cycle up to the last, each with its own figures; how many there are."""
    with open_logbook(place, create=False) as log:
        assert verify(log) == []
        if not reader.runs(log):
            assert at_least == 0
            return 0
        rows = reader.cycles(log, reader.resolve(log, "last"))
    assert [row["cycle"] for row in rows] == list(range(1, len(rows) + 1))
    assert len(rows) >= at_least
    for row in rows:
        assert {name: row[name] for name in log_child.FIELDS} == log_child.cycle(row["cycle"])
    return len(rows)


def test_every_acknowledged_cycle_is_there_after_ten_kills_at_random_moments(
    tmp_path: Path,
) -> None:
    place = tmp_path / "bench.db"
    dice = random.Random(20)
    known = kills_while_writing = 0
    for _ in range(10):
        process = start(place)
        first = process.stdout.readline() if process.stdout else ""
        time.sleep(dice.uniform(0.0, 0.15))
        said = kill(process)
        known = max(known, acknowledged(first + said))
        kills_while_writing += bool(first)
        assert check_whole(place, known) >= known
    assert kills_while_writing == 10
    print(f"{known} cycles acknowledged over ten kills, all there")


def test_kill_while_the_file_is_being_made_leaves_a_logbook_or_nothing(tmp_path: Path) -> None:
    dice = random.Random(21)
    for turn in range(5):
        place = tmp_path / f"{turn}.db"
        process = start(place)
        end_s = time.monotonic() + 20
        while not place.exists() and time.monotonic() < end_s:
            time.sleep(0.0005)
        time.sleep(dice.uniform(0.0, 0.02))
        known = acknowledged(kill(process))
        with open_logbook(place):
            pass
        check_whole(place, known)


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A file system of 1 MiB."""
    folder = tmp_path / "disk"
    folder.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=1m", "tmpfs", str(folder)]
    if not shutil.which("mount") or subprocess.run(mount, capture_output=True, check=False).returncode:
        pytest.skip("a small file system cannot be mounted here (needs root)")
    yield folder
    subprocess.run(["umount", "-l", str(folder)], check=True)


def fill_until_error(place: Path, ballast: Path) -> tuple[subprocess.Popen[str], int, dict[str, str]]:
    """Start a writer, take its room away, and read on to its error: what it had acknowledged."""
    process = start(place)
    assert process.stdout is not None
    known = int(process.stdout.readline())
    take_room(ballast)
    for line in process.stdout:
        if line.startswith("{"):
            return process, known, json.loads(line)
        known = int(line)
    raise AssertionError("the disk never filled up")


def take_room(ballast: Path) -> None:
    """Write until there is no more room but 32 KiB."""
    free = os.statvfs(ballast.parent)
    ballast.write_bytes(bytes(max(free.f_bavail * free.f_bsize - 32 * 1024, 0)))


def test_full_disk_is_told_and_the_flush_that_failed_succeeds_once_there_is_room(
    small_disk: Path, tmp_path: Path
) -> None:
    place, ballast = small_disk / "bench.db", small_disk / "ballast"
    process, known, error = fill_until_error(place, ballast)
    assert error["error"] == "LogbookError"
    assert all(error[part] for part in ("what", "at", "got", "bound", "try"))
    assert "nothing already logged is lost" in error["try"]
    copy = tmp_path / "copy.db"
    for end in ("", "-wal"):
        shutil.copy(f"{place}{end}", f"{copy}{end}")
    assert check_whole(copy, known) == known  # nothing of what was not acknowledged, either
    ballast.unlink()
    assert process.stdin is not None
    assert process.stdout is not None
    process.stdin.write("go on\n")
    process.stdin.flush()
    assert int(process.stdout.readline()) == known + 5
    known = acknowledged(f"{known + 5}\n" + kill(process))
    check_whole(place, known)


def test_writer_killed_on_a_full_disk_loses_nothing_it_acknowledged(small_disk: Path) -> None:
    place, ballast = small_disk / "bench.db", small_disk / "ballast"
    process, known, _ = fill_until_error(place, ballast)
    kill(process)
    ballast.unlink()
    assert check_whole(place, known) == known


def test_database_that_may_not_grow_is_told_and_keeps_what_it_had(tmp_path: Path) -> None:
    """The same without a mount: SQLite's own bound on the number of pages."""
    place = tmp_path / "bench.db"
    with open_logbook(place) as log:
        run = new_run(log, "run")
        with Writer(log, run) as writer:
            known = 0
            with log.read() as connection:
                pages = connection.exec_driver_sql("PRAGMA page_count").scalar_one()
                connection.exec_driver_sql(f"PRAGMA max_page_count = {pages + 8}")
            error = None
            for number in range(1, 10_000):
                writer.cycle(log_child.cycle(number))
                try:
                    known = writer.flush()
                except LogbookError as fault:
                    error = fault
                    break
            assert error is not None
            assert error.what == "the disk is full"
            assert len(reader.cycles(log, run)) == known
            with log.read() as connection:
                connection.exec_driver_sql("PRAGMA max_page_count = 100000")
            assert writer.flush() == known + 1
    check_whole(place, known + 1)


@pytest.mark.parametrize("part", [0.95, 0.5, 0.1, 0.0])
def test_write_ahead_log_cut_short_leaves_whole_transactions_only(
    tmp_path: Path, part: float
) -> None:
    """What a failing disk does. Its tail is gone, and nothing that is left contradicts itself."""
    place = tmp_path / "bench.db"
    process = start(place)
    assert process.stdout is not None
    for _ in range(12):
        process.stdout.readline()
    kill(process)
    wal = Path(f"{place}-wal")
    with wal.open("r+b") as file:
        file.truncate(int(wal.stat().st_size * part))
    with open_logbook(place):
        pass
    assert check_whole(place, 0) % 5 == 0


def test_write_ahead_log_with_a_flipped_byte_is_never_taken_for_whole_transactions(
    tmp_path: Path,
) -> None:
    place = tmp_path / "bench.db"
    process = start(place)
    assert process.stdout is not None
    for _ in range(12):
        process.stdout.readline()
    kill(process)
    wal = Path(f"{place}-wal")
    data = bytearray(wal.read_bytes())
    data[len(data) // 2] ^= 0x10
    wal.write_bytes(bytes(data))
    with open_logbook(place):
        pass
    assert check_whole(place, 0) % 5 == 0
