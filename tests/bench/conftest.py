"""One suite, three places: `bench` is a board at rest on the twin, on the real interpreter in
lock-step, and, when --rig names one, on a real board that may be energised."""

from __future__ import annotations

import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from boards import RIG, ROOT

from lodestroke import trips
from lodestroke.flash import bundle_id_for
from lodestroke.link import Beat, BoardInfo, Client, Entry, find_port, open_port
from lodestroke.rig import Rig, load_rig
from lodestroke.runner import session
from lodestroke.runner.dry_run import open_engine
from lodestroke.schedule import Program, compile_program, load_schedule
from lodestroke.virtual import available


class Bench:
    """A board with a client; `engine` only where it is simulated."""

    def __init__(self, place: str, rig: Rig, engine: Any, port: Any) -> None:
        self.place = place
        self.rig = rig
        self.engine = engine
        self.client = Client(port)
        self.client.hello()
        self.entries: list[Entry] = []

    def program(self, schedule: str = "gentle") -> Program:
        """A shipped schedule, compiled for this rig."""
        path = ROOT / "hil_configs" / "schedules" / f"{schedule}.toml"
        return compile_program(load_schedule(path), self.rig)

    def arm(self, schedule: str = "gentle") -> None:
        """Limits and program sent, armed."""
        program = self.program(schedule)
        session.load(self.client, self.rig, program, 0)
        self.client.command("arm", fingerprint=self.rig.fingerprint, program_crc32=program.crc32)

    def go(self, schedule: str = "gentle") -> None:
        """Armed and running."""
        self.arm(schedule)
        self.client.command("go", run_token=77, cycles_before=0, last_cycle=0)

    def beat(self) -> Beat:
        """How the board is now."""
        return session.look(self.client)

    def run_on(self, seconds: float) -> None:
        """Let the board run for a while with the host there; journal entries are kept."""
        end_s = self.client.port.now_s() + seconds
        while self.client.port.now_s() < end_s:
            event = self.client.poll(0.05)
            if isinstance(event, Entry):
                self.entries.append(event)
                self.client.saved(event.entry)

    def until(self, state: str, limit_s: float = 20.0) -> Beat:
        """The first beat in a state; fails the test when it does not come."""
        end_s = self.client.port.now_s() + limit_s
        while (beat := self.beat()).state != state:
            assert self.client.port.now_s() < end_s, f"{beat.state}, never {state}"
            self.run_on(0.05)
        self.run_on(0.5)  # the tail of its samples, then the latch goes to flash
        return beat

    def silence(self, seconds: float) -> None:
        """Let the board run on with nobody there."""
        if self.engine is None:
            time.sleep(seconds)
            return
        for _ in range(round(seconds / self.rig.board.tick)):
            self.engine.advance()

    def press(self, stop: bool = False, cutout_open: bool = False) -> None:
        """Work the input pins; only where the board is simulated."""
        if self.engine is None:
            pytest.skip("nobody is there to press a real board's inputs")
        self.engine.lockstep.inputs = int(stop) | int(cutout_open) << 1

    def reboot(self) -> BoardInfo:
        """Power away and back; only where the board is simulated."""
        if self.engine is None:
            pytest.skip("nobody is there to pull a real board's plug")
        self.engine.reboot()
        return self.client.hello()

    def enabled(self) -> bool:
        """The driver's enable line; on a real board what its state says."""
        if self.engine is not None:
            return bool(self.engine.lockstep.enable)
        return self.beat().state in ("running", "paused", "stopping")

    def rest(self) -> None:
        """Leave the board safe, whatever happened."""
        beat = self.beat()
        if beat.state in ("armed", "running", "paused"):
            self.client.command("stop")
            self.run_on(1.0)
            beat = self.beat()
        if beat.state == "tripped":
            session.clear_trip(self.client, beat, trips.name(beat.fields["trip_code"]))


def real_board(config: pytest.Config) -> tuple[Rig, str]:
    """The rig and port of the real board, or a skip that says what is missing."""
    named = config.getoption("--rig")
    if not named:
        pytest.skip("no real board: name its rig file with --rig")
    rig = load_rig(Path(named))
    port = config.getoption("--port") or find_port(rig.board.port.usb_serial or None)
    return rig, port


@pytest.fixture(params=["twin", "virtual", pytest.param("board", marks=pytest.mark.board)])
def bench(request: pytest.FixtureRequest) -> Iterator[Bench]:
    """A board at rest, with nothing latched."""
    if request.param == "board":
        rig, name = real_board(request.config)
        there = Bench("board", rig, None, open_port(name, dtr=rig.board.port.dtr))
        session.check_board(there.client.info, bundle_id_for(rig), name)  # type: ignore[arg-type]
        there.rest()
        try:
            yield there
        finally:
            there.rest()
            there.client.close()
        return
    if request.param == "virtual" and available() is not None:
        pytest.skip(f"no virtual board: {available()}")
    rig = load_rig(RIG)
    engine = open_engine(rig, 1, request.param)
    try:
        yield Bench(request.param, rig, engine, engine.port)
    finally:
        engine.close()
