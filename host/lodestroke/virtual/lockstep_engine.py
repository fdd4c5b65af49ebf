"""The virtual board in simulated time: the real interpreter, one exchange of two pipes per tick."""

from __future__ import annotations

import os
import select
import shutil
import tempfile
import weakref
from pathlib import Path
from typing import Any

from ..errors import PortLost
from ..plant import Plant
from ..shipped import firmware_dir
from ..twin.lockstep import Lockstep
from ..twin.simport import SimPort
from . import channel
from .interpreter import Interpreter
from .serve import HEAP_KIB

_ANSWER_S = 60.0           # start-up included; a tick takes microseconds


class VirtualEngine:
    """A lock-step virtual board for a rig; `.port` is its Port. Raises Unavailable.

    The same plant, exchange and port as the twin's engine; only what executes the firmware differs.
    """

    def __init__(self, rig: Any, seed: int = 0, bundle_id: bytes = b"\0" * 8) -> None:
        self.plant = Plant.from_rig(rig, seed)
        self.lockstep = Lockstep(self.plant)
        self.tick_s = float(rig.board.tick)
        self.port = SimPort(self, "lock-step virtual board")
        self.bundle_id = bundle_id
        self.board_id = rig.board.serial or "virtual"
        self.heap_kib = int(getattr(rig.board, "heap", None) or HEAP_KIB * 1024) // 1024
        self.boots = 0
        self._folder = Path(tempfile.mkdtemp(prefix="lodestroke-"))
        # also when nobody calls close(): the interpreter ends with our pipes, the folder would stay
        weakref.finalize(self, shutil.rmtree, self._folder, ignore_errors=True)
        self._said = self._folder / "said.txt"
        self._board: Interpreter | None = None
        try:
            self.reboot()
        except BaseException:
            self.close()
            raise

    def reboot(self, watchdog: bool = False) -> None:
        """Power away and back, or a reset: RAM is gone, what was stored stays."""
        if self._board is not None:
            self._board.end()
        self.boots += 1
        environment = {
            "LODESTROKE_MODE": "lockstep",
            "LODESTROKE_FIRMWARE": str(firmware_dir()),
            "LODESTROKE_FLASH": str(self._folder / "store"),
            "LODESTROKE_BUNDLE": self.bundle_id.hex(),
            "LODESTROKE_BOARD_ID": self.board_id,
            "LODESTROKE_NONCE": str(self.boots),
            "LODESTROKE_RESET": "watchdog" if watchdog else "power",
        }
        with open(os.devnull, "rb") as stdin, self._said.open("wb") as said:
            self._board = Interpreter(
                stdin.fileno(), said.fileno(), environment,
                heap_kib=self.heap_kib, home=self._folder, prompt=False,
            )

    def advance(self) -> None:
        """Serve one exchange. Raises PortLost when the interpreter has ended."""
        while (request := self._request()).kind == channel.RESET:
            self.reboot()
        assert self._board is not None
        if request.kind == channel.RELEASE:          # last bytes; the interpreter ends next
            self.lockstep.board_sent(request.tx)
            self._board.channel.answer()
            return
        counts, rx = self.lockstep.exchange(
            request.duty_a, request.duty_b, request.enable, request.tx
        )
        self._board.channel.answer(counts, self.lockstep.inputs, rx)

    def _request(self) -> channel.Request:
        if self._board is None:
            raise PortLost("the virtual board has been closed", at=self.port.name)
        pipe = self._board.channel
        if not select.select([pipe.request_fd], [], [], _ANSWER_S)[0]:
            raise self._lost(f"no request within {_ANSWER_S:g} s")
        request = pipe.take()
        if request is None:
            raise self._lost("its interpreter ended, or it gave its port back")
        return request

    def _lost(self, how: str) -> PortLost:
        said = self._said.read_text(errors="replace").strip()[-400:]
        return PortLost(
            "the virtual board stopped", at=self.port.name, got=f"{how}; it said: {said!r}",
            try_="run the same on the twin (--on twin) and compare",
        )

    def close(self) -> None:
        """End the interpreter; may be called twice."""
        if self._board is not None:
            self._board.end()
            self._board = None
        shutil.rmtree(self._folder, ignore_errors=True)
