"""The one file that runs mpremote: as a subprocess, with a time limit and a name for every step.

Why a process of its own: mpremote keeps no stable interface as a library, and on a pseudo-terminal
it can wait for ever.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Sequence

from ..errors import FlashError

_RETRY_AFTER_S = 1.5          # a board that resets takes this long to show its port again

# What mpremote prints: (part of it, what that usually means, what to do).
_MEANINGS = (
    ("could not enter raw repl", "the board does not give its prompt",
     "end the run on it, or reset the board and try again within its boot window (1.5 s)"),
    ("failed to access", "the port cannot be opened, or another program has it",
     "close the other program; look at the cable; name the port with --port"),
    ("no device found", "no board is connected", "connect it, or name the port with --port"),
    ("ENOSPC", "the board's flash is full", "remove files of your own: mpremote fs ls"),
    ("No space left", "the board's flash is full", "remove files of your own: mpremote fs ls"),
    ("memory allocation failed", "the board ran out of memory", "reset the board and try again"),
    ("No module named mpremote", "mpremote is not installed", "pip install mpremote"),
)


class Mpremote:
    """mpremote on one port. `say` gets a line per step."""

    def __init__(self, port: str) -> None:
        self.port = port
        self.connected = False

    def run(self, step: str, arguments: Sequence[str], limit_s: float) -> str:
        """Run mpremote commands; what they printed.

        The first one soft-resets the board into its raw REPL, main.py skipped; those after it go on
        from there. The first is tried twice: a board that has to reset to let go of its watchdog
        loses its port on the way. Raises FlashError.
        """
        if self.connected:
            return self._once(step, ["resume", *arguments], limit_s)
        try:
            out = self._once(step, arguments, limit_s)
        except FlashError:
            time.sleep(_RETRY_AFTER_S)
            out = self._once(step, arguments, limit_s)
        self.connected = True
        return out

    def execute(self, step: str, code: str, limit_s: float = 10.0) -> str:
        """Run a snippet on the board; what it printed."""
        return self.run(step, ["exec", code], limit_s)

    def _once(self, step: str, arguments: Sequence[str], limit_s: float) -> str:
        # mpremote knows a pseudo-terminal by its own name only; by a link it is five times slower
        device = os.path.realpath(self.port) if os.path.islink(self.port) else self.port
        command = [sys.executable, "-m", "mpremote", "connect", device, *arguments]
        try:
            done = subprocess.run(
                command, capture_output=True, timeout=limit_s, stdin=subprocess.DEVNULL,
                check=False,
            )
        except subprocess.TimeoutExpired as late:
            raise self._failed(step, _text(late.stdout) + _text(late.stderr), limit_s) from late
        said = _text(done.stdout) + _text(done.stderr)
        if done.returncode:
            raise self._failed(step, said, None)
        return _text(done.stdout)

    def _failed(self, step: str, said: str, limit_s: float | None) -> FlashError:
        meaning, advice = "", "reset the board and try again"
        for part, means, do in _MEANINGS:
            if part in said:
                meaning, advice = means, do
                break
        if limit_s is not None and not meaning:
            meaning = f"no end within {limit_s:g} s"
            advice = "another program on the port, or a board that hangs: reset it and try again"
        last = " | ".join(line.strip() for line in said.splitlines() if line.strip())[-400:]
        return FlashError(
            f"installing failed at step '{step}'" + (f": {meaning}" if meaning else ""),
            at=self.port, got=f"mpremote said: {last}" if last else "mpremote said nothing",
            bound=f"an end within {limit_s:g} s" if limit_s is not None else "", try_=advice,
        )


def _text(raw: bytes | None) -> str:
    return (raw or b"").decode("utf-8", "replace")
