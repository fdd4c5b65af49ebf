"""Helpers of the virtual board's tests: mpremote as a user runs it, and waiting for a condition."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

from lodestroke.link import BoardInfo, Client, open_port

ROOT = Path(__file__).resolve().parents[2]
RIG = ROOT / "hil_configs" / "bench-sim.toml"


def mpremote(port: str, *arguments: str, limit_s: float = 20.0) -> str:
    """Run the real mpremote; what it printed. Fails the test on an error or a hang."""
    done = subprocess.run(
        [sys.executable, "-m", "mpremote", "connect", port, *arguments],
        capture_output=True, text=True, timeout=limit_s, stdin=subprocess.DEVNULL, check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return done.stdout


def hello(port: str) -> BoardInfo:
    """Who answers on the link."""
    client = Client(open_port(port))
    try:
        return client.hello()
    finally:
        client.close()


def until(condition: Callable[[], bool], limit_s: float = 15.0) -> None:
    """Wait for a condition; fails the test when it does not come true."""
    end = time.monotonic() + limit_s
    while not condition():
        assert time.monotonic() < end, "waited in vain"
        time.sleep(0.02)


def alive(pid: int) -> bool:
    """Whether a process runs (a zombie does not)."""
    try:
        os.kill(pid, 0)
        return Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()[0] != "Z"
    except (ProcessLookupError, FileNotFoundError):
        return False
