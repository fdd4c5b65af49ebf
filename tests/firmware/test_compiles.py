"""Every file that goes on a board is one that the real interpreter compiles."""

from __future__ import annotations

import subprocess
from pathlib import Path

import pytest

from lodestroke.virtual import available
from lodestroke.virtual.interpreter import board_files, interpreter_path

pytestmark = pytest.mark.skipif(available() is not None, reason=f"no interpreter: {available()}")
FIRMWARE = Path(__file__).resolve().parents[2] / "firmware"

_COMPILE = """
import sys
for name in sys.argv[1:]:
    with open(name) as file:
        text = file.read()
    try:
        compile(text, name, "exec")
    except Exception as fault:
        print(name, repr(fault))
print("done")
"""


def test_the_real_interpreter_compiles_every_board_file(tmp_path: Path) -> None:
    """hal_rp2.py among them, which nothing but its board can run."""
    script = tmp_path / "compile_all.py"
    script.write_text(_COMPILE)
    names = [str(path) for folder in (FIRMWARE, board_files()) for path in folder.rglob("*.py")]
    assert any(name.endswith("hal_rp2.py") for name in names)
    done = subprocess.run(
        [interpreter_path(), str(script), *names],
        capture_output=True, text=True, timeout=60, check=True,
    )
    assert done.stdout == "done\n"
