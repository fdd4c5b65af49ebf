"""`board` and `flash` as a user types them."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
from boards import RIG, ROOT, alive, mpremote

from lodestroke.virtual import available

pytestmark = pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")
LODESTROKE = [sys.executable, "-m", "lodestroke.cli.main"]


def children(pid: int) -> list[int]:
    """Processes started by a process."""
    listed = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
    return [int(child) for child in listed]


@contextmanager
def board_command(
    *options: str, temporary: Path | None = None
) -> Iterator[tuple[subprocess.Popen[str], str]]:
    """The command in the background, and the port that it printed."""
    process = subprocess.Popen(
        [*LODESTROKE, "board", str(RIG), *options],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        env={**os.environ, **({"TMPDIR": str(temporary)} if temporary else {})},
    )
    with process:
        assert process.stdout is not None
        try:
            yield process, process.stdout.readline().strip()
        finally:
            process.terminate()


@pytest.mark.parametrize("how", [signal.SIGTERM, signal.SIGINT])
def test_board_prints_its_port_and_ends_cleanly(how: signal.Signals, tmp_path: Path) -> None:
    with board_command(temporary=tmp_path) as (process, port):
        assert mpremote(port, "exec", "print(1)") == "1\n"
        interpreters = children(process.pid)
        assert interpreters
        process.send_signal(how)
        assert process.wait(10) == 0
        assert not any(alive(pid) for pid in interpreters)
        assert "Traceback" not in (process.stderr.read() if process.stderr else "")
    assert not list(tmp_path.iterdir())


def test_board_makes_its_link_and_takes_it_away(tmp_path: Path) -> None:
    link = tmp_path / "bench"
    link.symlink_to("/dev/left-over-from-before")
    with board_command("--link", str(link)) as (process, port):
        assert os.readlink(link) == port
        process.send_signal(signal.SIGTERM)
        process.wait(10)
    assert not link.is_symlink()


def test_board_never_replaces_a_file_by_its_link(tmp_path: Path) -> None:
    precious = tmp_path / "notes.txt"
    precious.write_text("mine")
    done = subprocess.run(
        [*LODESTROKE, "board", str(RIG), "--link", str(precious)],
        capture_output=True, text=True, timeout=60, check=False,
    )
    assert done.returncode == 4
    assert "taken" in done.stderr
    assert precious.read_text() == "mine"


def test_flash_installs_and_the_flash_is_kept_where_asked(tmp_path: Path) -> None:
    folder = tmp_path / "flash"
    with board_command("--keep", str(folder)) as (_, port):
        done = subprocess.run(
            [*LODESTROKE, "flash", str(RIG), "--port", port, "--json"],
            capture_output=True, text=True, timeout=60, check=True,
        )
    answer = json.loads(done.stdout)
    assert (folder / answer["slot"] / "bundle.txt").read_text().strip() == answer["bundle"]
    assert "copying" in done.stderr


def test_flash_without_a_board_ends_with_five_parts_and_its_code() -> None:
    done = subprocess.run(
        [*LODESTROKE, "flash", str(RIG), "--port", "/dev/no-such-port"],
        capture_output=True, text=True, timeout=60, check=False,
    )
    assert done.returncode == 4
    assert "Traceback" not in done.stderr
    assert {"at", "got", "bound", "try"} <= {line.split()[0] for line in done.stderr.splitlines()}


def test_board_refuses_a_rig_of_a_real_board() -> None:
    began = time.monotonic()
    done = subprocess.run(
        [*LODESTROKE, "board", str(ROOT / "hil_configs" / "bench-rp2040.toml")],
        capture_output=True, text=True, timeout=60, check=False,
    )
    assert done.returncode == 2, (done.stderr, time.monotonic() - began)
    assert "rp2040" in done.stderr
