"""Runs scripts on the real MicroPython interpreter, with a board's heap."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

FIRMWARE = Path(__file__).resolve().parents[2] / "firmware"
HERE = Path(__file__).resolve().parent


def interpreter() -> str:
    """The interpreter's path; skips with the reason where there is none."""
    beside = Path(sys.executable).with_name("micropython")
    found = str(beside) if beside.exists() else shutil.which("micropython")
    if not found:
        pytest.skip("no MicroPython interpreter: its wheel does not exist for this platform")
    return found


def run_script(name: str, *arguments: str, heap: str = "192K", timeout: float = 120.0) -> str:
    """What a script of this folder prints; fails with what it said when it fails."""
    done = subprocess.run(
        [interpreter(), "-X", f"heapsize={heap}", str(HERE / name), str(FIRMWARE), *arguments],
        capture_output=True, text=True, timeout=timeout, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    return done.stdout
