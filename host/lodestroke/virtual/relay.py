"""The virtual board seen from outside: a serial port with a real interpreter and a plant behind it.

Users open the outer pseudo-terminal; the interpreter sits on the inner one. Between the two this
process does what a board's USB stack, reset logic and power switch do: it mends line ends, turns a
Ctrl-C into an interrupt while the firmware does not own the port, starts the interpreter anew after
a soft reset, holds back a host that writes too fast, and drops the coil when nobody feeds the
deadman. The plant advances exactly one tick per exchange; only the pace is the wall clock's.
"""

from __future__ import annotations

import os
import select
import signal
import time
from pathlib import Path
from typing import Any

from ..twin.lockstep import Lockstep
from . import channel, ptys
from .guard import Guard
from .interpreter import Interpreter
from .side import SideChannel

_PENDING_MAX = 512          # a board's receive ring: beyond it the host has to wait
_UP_MAX = 4096
_CLOSED_LOOK_S = 0.01       # how often to look whether somebody has opened the port
_RAW, _FRIENDLY, _ETX = 0x01, 0x02, 0x03
_INTERRUPT_S = 1.0          # an exit this soon after an interrupt is the interrupt's doing
_QUICK_EXITS_MAX = 5        # an interpreter that cannot start must not be started for ever


class Relay:
    """One virtual board. `flash` is the folder that it sees as its file system."""

    def __init__(
        self, bench: Lockstep, flash: Path, work: Path, board_id: str, heap_kib: int
    ) -> None:
        self.bench = bench
        self.flash = flash
        self.work = work
        self.board_id = board_id
        self.heap_kib = heap_kib
        self.ending = False
        self.guard = Guard()
        self.outer, slave, self.port = ptys.open_raw()
        os.close(slave)                  # so that "nobody has it open" can be told
        self.inner, self.inner_slave, _ = ptys.open_raw()
        self.side = SideChannel(str(work / "side"), self.act)
        self.parent_fd = -1
        self.launches = 0
        self.ticks = 0
        self._open = False
        self._look_at = 0.0
        self._interrupted_at = 0.0
        self._wake_at = 0.0
        self._from_host = bytearray()
        self._to_host = bytearray()
        self._mender = ptys.LineMender()
        self._owned = False
        self._raw = False
        self._cause = "power"
        self._quick_exits = 0
        self._launch(run_main=True)

    # --- life of the interpreter

    def _launch(self, run_main: bool) -> None:
        self._up = False
        self._owned = False
        self.guard = Guard()
        self.launches += 1
        self._launched_at = time.monotonic()
        self.board = Interpreter(
            self.inner_slave, self.inner_slave,
            {
                "LODESTROKE_MODE": "paced",
                "LODESTROKE_FLASH": str(self.flash),
                "LODESTROKE_MAIN": "1" if run_main else "0",
                "LODESTROKE_RESET": self._cause,
                "LODESTROKE_BOARD_ID": self.board_id,
                "LODESTROKE_NONCE": str(int.from_bytes(os.urandom(4), "little") >> 2),
            },
            heap_kib=self.heap_kib, home=self.work,
        )
        self._cause = ""

    def _ended(self) -> None:
        """The interpreter is gone: a reset that was asked for, a power cut, or a soft reset."""
        self._from_inner()
        code = self.board.end()
        quick = not self._up and time.monotonic() - self._launched_at < 2
        self._quick_exits = self._quick_exits + 1 if quick else 0
        if self._quick_exits >= _QUICK_EXITS_MAX:
            self._say(b"\r\nthe interpreter does not start\r\n")
            self.ending = True
        elif self._cause:
            ptys.forget(self.inner_slave)
            self._from_host.clear()
            self._raw = False
            self._launch(run_main=True)
        else:
            self._say(b"MPY: soft reboot\r\n")
            self._cause = "soft"
            # As on a board: a soft reset out of the raw REPL skips main.py and stays raw. And an
            # interrupt can kill this interpreter (it raises in the midst of anything): whoever
            # sent it wants the prompt.
            if self._raw:
                self._from_host[:0] = bytes([_RAW])
            interrupted = time.monotonic() - self._interrupted_at < _INTERRUPT_S
            self._launch(run_main=not self._raw and not (code and interrupted))

    def cut(self, cause: str) -> None:
        """Take the power away, or pull the reset line: no farewell, no message."""
        self._cause = cause
        self._wake_at = 0.0
        self.board.end()
        self._dead = True

    # --- bytes

    def _say(self, data: bytes) -> None:
        if self._open:
            self._to_host += data

    def _from_outer(self) -> None:
        try:
            data = os.read(self.outer, _PENDING_MAX)
        except BlockingIOError:
            return
        except OSError:
            data = b""
        if data:
            self._open = True
            self._from_host += data
        else:
            self._closed()

    def _closed(self) -> None:
        """Nobody has the port open: what is on its way up is lost, as on a USB port."""
        if self._open:
            self._to_host.clear()
            ptys.forget_by_name(self.port)
        self._open = False
        self._look_at = time.monotonic() + _CLOSED_LOOK_S

    def _from_inner(self) -> None:
        try:
            data = os.read(self.inner, _UP_MAX)
        except OSError:
            return
        self._say(data if self._owned else self._mender.mend(data))

    def _push_down(self) -> None:
        """Hand what the host wrote to the interpreter: as data, or as an interrupt."""
        data = self._from_host
        while data and self._up and ptys.waiting(self.inner_slave) < _PENDING_MAX:
            part = bytes(data[:1]) if data[0] == _ETX else bytes(data.partition(b"\x03")[0])
            if part[0] == _ETX and not self._owned and self.board.catches_ctrl_c():
                ptys.forget(self.inner_slave)      # an interrupt empties the receive ring
                self.board.signal(signal.SIGINT)
                self._interrupted_at = time.monotonic()
                del data[:1]
                continue
            try:
                sent = os.write(self.inner, part)
            except BlockingIOError:
                return
            for byte in part[:sent]:
                if byte in (_RAW, _FRIENDLY):      # the mode decides what a soft reset does
                    self._raw = byte == _RAW
            del data[:sent]

    def _push_up(self) -> None:
        try:
            sent = os.write(self.outer, self._to_host)
        except BlockingIOError:
            return
        except OSError:
            self._closed()
            return
        del self._to_host[:sent]

    # --- the metal

    def _request(self) -> None:
        request = self.board.channel.take()
        if request is None:
            self._dead = True
            return
        if request.kind == channel.EXCHANGE:
            self.ticks += 1
            enable = self.guard.fed(request.enable)
            counts, _ = self.bench.exchange(request.duty_a, request.duty_b, enable, b"")
            self.board.channel.answer(counts, self.bench.inputs)
            return
        if request.kind == channel.UP:
            self._up = True
        elif request.kind in (channel.OWN, channel.RELEASE):
            self._from_inner()
            self._owned = request.kind == channel.OWN
            # unlike a real one, this watchdog can be stopped: nobody feeds it at the prompt
            self.guard = Guard()
        elif request.kind == channel.RESET:
            self.cut("reset")
            return
        elif request.kind == channel.GUARD:
            self.guard.start(request.duty_a, request.duty_b)
        self.board.channel.answer()

    def act(self, name: str, values: list[str]) -> dict[str, Any]:
        """A command of the side channel; its answer."""
        if name == "power-cut":
            self.cut("power")
        elif name == "reset":
            self.cut("reset")
        elif name == "hang" and values:
            self.board.signal(signal.SIGSTOP)
            self._wake_at = time.monotonic() + float(values[0]) / 1000
        elif name == "inputs" and values:
            self.bench.inputs = int(values[0])
        elif name != "status":
            return {"error": f"unknown command {name}"}
        return self.status()

    def status(self) -> dict[str, Any]:
        """What the bench sees from outside."""
        return {
            "port": self.port, "pid": self.board.process.pid, "launches": self.launches,
            "ticks": self.ticks, "owned": self._owned, "enabled": self.guard.enabled,
            "deadman_drops": self.guard.drops, "open": self._open,
        }

    # --- the loop

    def serve(self) -> None:
        """Run until told to end; leaves no process and no open port behind."""
        try:
            while not self.ending:
                self._once()
        finally:
            self.close()

    def _once(self) -> None:
        self._dead = False
        reads: list[Any] = [self.board.channel.request_fd, self.side]
        if self.parent_fd >= 0:
            reads.append(self.parent_fd)
        if len(self._to_host) < _UP_MAX:
            reads.append(self.inner)
        room = len(self._from_host) < _PENDING_MAX
        if room and (self._open or time.monotonic() >= self._look_at):
            reads.append(self.outer)
        writes = [self.outer] if self._to_host else []
        ready, writable, _ = select.select(reads, writes, [], self._timeout_s())
        if self.parent_fd in ready and not os.read(self.parent_fd, 64):
            self.ending = True
        for source, serve in (
            (self.inner, self._from_inner), (self.outer, self._from_outer),
            (self.board.channel.request_fd, self._request), (self.side, self.side.serve),
        ):
            if source in ready:
                serve()
        if self.outer in reads and self.outer not in ready:
            self._open = True            # no hang-up shown: somebody has it open and is silent
        if writable:
            self._push_up()
        self._keep_time()

    def _timeout_s(self) -> float:
        if not self._open or self._wake_at or self.guard.deadman_s:
            return _CLOSED_LOOK_S
        return 0.002 if self._from_host else 0.2

    def _keep_time(self) -> None:
        now = time.monotonic()
        if self._wake_at and now >= self._wake_at:
            self._wake_at = 0.0
            self.board.signal(signal.SIGCONT)
        if self.guard.check() and not self._dead:
            self.cut("watchdog")
        if self._dead:
            self._ended()
        self._push_down()

    def close(self) -> None:
        """End the interpreter and give both terminals back; may be called twice."""
        if self.outer < 0:
            return
        self.board.end()
        self.side.close()
        for fd in (self.outer, self.inner, self.inner_slave):
            os.close(fd)
        self.outer = -1
