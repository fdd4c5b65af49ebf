"""Type checks: the host strictly, then the firmware against each board's stub package.

Run as `python tests/tools/check_types.py`. The stubs go into .stubs/ (git-ignored), one folder per
board and never into an environment: their top-level time.pyi or select.pyi would hide the host's
own. Without a network and without the folder the firmware part fails and says so.
"""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
STUBS = ROOT / ".stubs"
# Pinned: a new set of stubs is a change of ours, not a surprise.
BOARDS = {
    "rpi_pico": "micropython-rp2-rpi_pico-stubs==1.29.0.post1",
    "rpi_pico2": "micropython-rp2-rpi_pico2-stubs==1.29.0.post1",
}

# The stubs are not strict-clean themselves; and `custom_typeshed_dir` makes "import dataclasses",
# which no board has, an error.
CONFIG = """\
[mypy]
strict = True
files = {firmware}/lodeboard, {firmware}/boot
mypy_path = {stubs}:{firmware}:{firmware}/boot
custom_typeshed_dir = {stubs}
python_version = 3.11
cache_dir = {cache}
explicit_package_bases = True

[mypy-machine,micropython,rp2.*,time,vfs,asyncio.*,uasyncio.*,_mpy_shed.*]
ignore_errors = True
"""


def main() -> int:
    """0 when host and firmware are clean."""
    failed = _mypy("host", [])
    for board, package in BOARDS.items():
        stubs = _stubs(board, package)
        if stubs is None:
            failed = True
            continue
        config = STUBS / f"{board}.ini"
        config.write_text(
            CONFIG.format(
                firmware=ROOT / "firmware", stubs=stubs, cache=STUBS / f"cache-{board}"
            )
        )
        failed |= _mypy(f"firmware against {package}", ["--config-file", str(config)])
    return int(failed)


def _stubs(board: str, package: str) -> Path | None:
    """The folder with a board's stubs, fetched once per version; None when it cannot be had."""
    folder = STUBS / board
    stamp = folder / "installed.txt"
    if stamp.is_file() and stamp.read_text() == package:
        return folder
    done = subprocess.run(
        [sys.executable, "-m", "pip", "install", "--quiet", "--disable-pip-version-check",
         "--upgrade", "--target", str(folder), package],
        capture_output=True, text=True, check=False,
    )
    if done.returncode:
        print(f"firmware against {package}: the stubs cannot be installed\n{done.stderr}")
        return None
    stamp.write_text(package)
    return folder


def _mypy(what: str, arguments: list[str]) -> bool:
    """Run mypy; True when it found something."""
    done = subprocess.run(
        [sys.executable, "-m", "mypy", *arguments], cwd=ROOT, capture_output=True, text=True,
        check=False,
    )
    print(f"{what}: {'FAILED' if done.returncode else 'ok'}")
    print((done.stdout + done.stderr).rstrip(), flush=True)
    return done.returncode != 0


if __name__ == "__main__":
    sys.exit(main())
