"""SIGKILL, SIGINT, SIGTERM and a cut of power, on the real command, interpreter and serial port."""

from __future__ import annotations

import json
import os
import random
import resource
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from lodestroke.flash import board_image
from lodestroke.logbook import open_logbook, reader
from lodestroke.logbook.verify import verify
from lodestroke.rig import load_rig
from lodestroke.virtual import VirtualBoard, available, start_board

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}"),
]

CONFIGS = Path(__file__).resolve().parents[2] / "hil_configs"
RIG = CONFIGS / "bench-sim.toml"
LODESTROKE = [sys.executable, "-m", "lodestroke.cli.main"]


class Host:
    """The bench computer: starts the command and does to it what happens to commands."""

    def __init__(self, folder: Path, board: VirtualBoard) -> None:
        self.board = board
        self.target = 0
        self.book = folder / "bench.db"
        self.plan = folder / "plan.toml"

    def aim(self, target: int, items: str = "") -> None:
        """Write the plan: so many cycles, check-ups in the middle and at the end."""
        steady = CONFIGS / "schedules" / "steady.toml"
        text = (CONFIGS / "plans" / "short.toml").read_text(encoding="utf-8")
        text = text.replace("../schedules/steady.toml", steady.as_posix())
        text = text.replace("target_cycles = 60", f"target_cycles = {target}")
        text = text.replace("every_cycles = 30", f"every_cycles = {target // 2}")
        if items:
            row = next(line for line in text.splitlines() if line.startswith("items"))
            text = text.replace(row, f"items = [{items}]")
        self.plan.write_text(text, encoding="utf-8")
        self.target = target

    def start(
        self, *options: str, preexec_fn: Callable[[], None] | None = None
    ) -> subprocess.Popen[str]:
        return subprocess.Popen(
            [
                *LODESTROKE,
                "--logbook",
                str(self.book),
                "endure",
                str(RIG),
                str(self.plan),
                "--port",
                self.board.port,
                "--json",
                *options,
            ],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            preexec_fn=preexec_fn,  # noqa: PLW1509 - no thread runs here
        )

    def finish(self, process: subprocess.Popen[str], limit_s: float = 120.0) -> dict[str, Any]:
        """Its answer; fails the test if it did not end well in time."""
        try:
            out, err = process.communicate(timeout=limit_s)
        finally:
            process.kill()
        assert "Traceback" not in err, err
        answer: dict[str, Any] = json.loads(out)
        answer["code"] = process.returncode
        return answer

    def cycles(self) -> list[int]:
        """What is on disk now; empty before there is a run."""
        if not self.book.exists():
            return []
        book = open_logbook(self.book)
        try:
            if not reader.runs(book):
                return []
            return [row["cycle"] for row in reader.cycles(book, "r0001")]
        finally:
            book.engine.dispose()

    def wait_for_cycle(self, cycle: int, process: subprocess.Popen[str]) -> None:
        end = time.monotonic() + 60.0
        while len(self.cycles()) < cycle:
            assert process.poll() is None, process.communicate()
            assert time.monotonic() < end, "no cycles come"
            time.sleep(0.1)


@pytest.fixture
def host(tmp_path: Path) -> Iterator[Host]:
    with start_board(RIG, files=board_image(load_rig(RIG))) as board:
        yield Host(tmp_path, board)


def until(condition: Callable[[], bool], limit_s: float) -> None:
    """Wait for a condition; fails the test when it does not come true."""
    end = time.monotonic() + limit_s
    while not condition():
        assert time.monotonic() < end, "waited in vain"
        time.sleep(0.02)


def whole(host: Host) -> None:
    """Every cycle once, nothing that verify finds."""
    assert host.cycles() == list(range(1, host.target + 1))
    assert verify(open_logbook(host.book)) == []


def test_ten_kills_of_the_host_at_random_moments_lose_and_double_no_cycle(host: Host) -> None:
    host.aim(100)
    chance = random.Random(os.environ.get("LODESTROKE_KILL_SEED", "20261201"))
    process = host.start()
    host.wait_for_cycle(1, process)
    for _ in range(10):
        time.sleep(chance.uniform(0.05, 3.5))
        process.kill()
        process.communicate()
        acknowledged = host.cycles()
        assert acknowledged == list(range(1, len(acknowledged) + 1))
        process = host.start("--resume")
    answer = host.finish(process)
    assert (answer["code"], answer.get("end")) == (0, "target reached"), answer
    assert answer["cycles_done"] == answer["target_cycles"] == host.target
    assert answer["gaps"] == []
    # a host that died before it had counted its resume did not resume
    assert 1 <= answer["resumes"] <= 10
    whole(host)


def test_an_interrupted_run_ends_safe_is_recorded_and_resumes(host: Host) -> None:
    host.aim(40, '"coil_resistance"')
    process = host.start()
    host.wait_for_cycle(5, process)
    process.send_signal(signal.SIGTERM)
    process.send_signal(signal.SIGINT)  # impatience does no harm
    answer = host.finish(process, 20.0)
    assert (answer["code"], answer["end"]) == (130, "interrupted")
    assert not host.board.status()["enabled"]
    again = host.finish(host.start("--resume"))
    assert (again["code"], again["end"], again["resumes"]) == (0, "target reached", 1)
    assert again["gaps"] == []
    whole(host)


def test_power_cut_under_a_run_is_one_gap_and_the_rest_is_whole(host: Host) -> None:
    host.aim(40, '"coil_resistance"')
    process = host.start()
    host.wait_for_cycle(5, process)
    host.board.power_cut()
    answer = host.finish(process, 30.0)
    assert answer["code"] == 5
    assert answer["try"]
    again = host.finish(host.start("--resume"))
    assert (again["code"], again["end"], len(again["gaps"])) == (0, "target reached", 1)
    whole(host)


def test_a_disk_that_fills_up_stops_the_board_and_loses_no_cycle(host: Host) -> None:
    host.aim(40, '"coil_resistance"')

    def small_disk() -> None:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (400_000, 400_000))

    answer = host.finish(host.start(preexec_fn=small_disk), 60.0)
    assert answer["code"] == 7
    assert answer["try"]
    until(lambda: not host.board.status()["enabled"], 2.0)
    on_disk = host.cycles()
    assert on_disk == list(range(1, len(on_disk) + 1))
    again = host.finish(host.start("--resume"))
    assert (again["code"], again["end"], again["gaps"]) == (0, "target reached", [])
    whole(host)
