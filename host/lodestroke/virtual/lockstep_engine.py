"""The virtual board in simulated time: the real interpreter, one exchange of two pipes per tick."""

from __future__ import annotations

import os
import select
import shutil
import tempfile
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
        self._folder = Path(tempfile.mkdtemp(prefix="lodestroke-"))
        self._said = self._folder / "said.txt"
        heap = int(getattr(rig.board, "heap", None) or HEAP_KIB * 1024)
        stdin = os.open(os.devnull, os.O_RDONLY)
        said = os.open(self._said, os.O_WRONLY | os.O_CREAT)
        try:
            self._board: Interpreter | None = Interpreter(
                stdin, said,
                {
                    "LODESTROKE_MODE": "lockstep",
                    "LODESTROKE_FIRMWARE": str(firmware_dir()),
                    "LODESTROKE_BUNDLE": bundle_id.hex(),
                    "LODESTROKE_BOARD_ID": rig.board.serial or "virtual",
                },
                heap_kib=heap // 1024, home=self._folder, prompt=False,
            )
        finally:
            os.close(stdin)
            os.close(said)

    def advance(self) -> None:
        """Serve one exchange. Raises PortLost when the interpreter has ended."""
        if self._board is None:
            raise PortLost("the virtual board has been closed", at=self.port.name)
        pipe = self._board.channel
        if not select.select([pipe.request_fd], [], [], _ANSWER_S)[0]:
            raise self._lost(f"no request within {_ANSWER_S:g} s")
        request = pipe.take()
        if request is None or request.kind == channel.RESET:
            raise self._lost("its interpreter ended")
        counts, rx = self.lockstep.exchange(
            request.duty_a, request.duty_b, request.enable, request.tx
        )
        pipe.answer(counts, self.lockstep.inputs, rx)

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
