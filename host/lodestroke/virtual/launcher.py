"""Starting a virtual board from Python: `with start_board(rig) as board: ... board.port ...`."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
import tempfile
import threading
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from types import TracebackType
from typing import Any

from ..errors import Unavailable
from . import side
from .interpreter import interpreter_path
from .serve import BoardConfig

_START_S = 120        # the plant may have to be compiled first
_STOP_S = 5


class VirtualBoard:
    """A running virtual board. Ends with the block, or with this process, whichever is first."""

    def __init__(self, config: BoardConfig, temporary: list[Path]) -> None:
        self._temporary = temporary
        self.flash = Path(config.flash)
        self._process = subprocess.Popen(
            [sys.executable, "-m", "lodestroke.virtual", json.dumps(asdict(config))],
            stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True,
        )
        try:
            said = self._first_line()
        except BaseException:
            self.stop()
            raise
        self.port: str = config.link or said["port"]
        self.pid = self._process.pid
        self._side: str = said["side"]

    def _first_line(self) -> dict[str, Any]:
        assert self._process.stdout is not None
        guard = threading.Timer(_START_S, self._process.kill)
        guard.start()
        try:
            line = self._process.stdout.readline()
        finally:
            guard.cancel()
        said: dict[str, Any] = json.loads(line or "{}")
        if "port" in said:
            return said
        failed = said.get("failed", {})
        raise Unavailable(
            failed.get("what") or "the virtual board did not start",
            at=failed.get("at", ""), got=failed.get("got", "no answer from its process"),
            bound=failed.get("bound", ""), try_=failed.get("try", ""),
        )

    def power_cut(self) -> None:
        """Power away and back: no farewell, no message, a new boot nonce; flash stays."""
        side.ask(self._side, "power-cut")

    def reset(self) -> None:
        """The reset line, pulled and let go."""
        side.ask(self._side, "reset")

    def hang(self, ms: int) -> None:
        """Stop the processor dead for a while; deadman and watchdog go on."""
        side.ask(self._side, f"hang {ms}")

    def inputs(self, stop: bool = False, cutout_open: bool = False) -> None:
        """Press the stop input, open the external cut-out."""
        side.ask(self._side, f"inputs {int(stop) | int(cutout_open) << 1}")

    def status(self) -> dict[str, Any]:
        """port, pid, launches, ticks, owned, enabled, deadman_drops, open."""
        return side.ask(self._side, "status")

    def stop(self) -> None:
        """End it and leave nothing behind; may be called twice."""
        process = self._process
        if process.stdin and not process.stdin.closed:
            process.stdin.close()
        try:
            process.wait(_STOP_S)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
        if process.stdout:
            process.stdout.close()
        for folder in self._temporary:
            shutil.rmtree(folder, ignore_errors=True)

    def __enter__(self) -> VirtualBoard:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.stop()


def start_board(
    rig_path: str | Path,
    link: str | Path | None = None,
    seed: int = 0,
    folder: str | Path | None = None,
    *,
    files: Mapping[str, bytes] | None = None,
    still: bool = False,
) -> VirtualBoard:
    """Start a virtual board for a rig; a context manager with `.port`.

    folder: keeps the board's flash; without it the flash is new and goes with the board.
    files: put on the flash before power-up, by path (a board that comes with firmware installed:
    `lodestroke.flash.board_image`). still: no plant, every sensor stands still.
    Raises Unavailable where there is no interpreter, RigError.
    """
    interpreter_path()
    work = Path(tempfile.mkdtemp(prefix="lodestroke-"))
    flash = Path(folder).absolute() if folder else work / "flash"
    flash.mkdir(parents=True, exist_ok=True)
    for name, data in (files or {}).items():
        path = flash / name.lstrip("/")
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(data)
    config = BoardConfig(
        rig=str(rig_path), work=str(work), flash=str(flash), seed=seed,
        link=str(link or ""), still=still,
    )
    return VirtualBoard(config, [work])
