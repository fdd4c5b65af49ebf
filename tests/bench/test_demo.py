"""`lodestroke demo`: the whole line by its real commands, and nothing left behind."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
from pathlib import Path

import pytest
from boards import until

from lodestroke.virtual import available

DEMO = [sys.executable, "-m", "lodestroke.cli.main", "demo", "--out"]


def below(folder: Path) -> list[str]:
    """Command lines of processes that work in a folder."""
    found = []
    for entry in Path("/proc").glob("[0-9]*"):
        try:
            if Path(os.readlink(entry / "cwd")).is_relative_to(folder):
                found.append((entry / "cmdline").read_text())
        except OSError:
            continue  # not ours, or gone meanwhile
    return found


@pytest.mark.slow
def test_the_demo_does_the_main_job_and_leaves_files_only(tmp_path: Path) -> None:
    folder = tmp_path / "demo"
    done = subprocess.run(
        [*DEMO, str(folder)], capture_output=True, text=True, timeout=250, check=False
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert "Traceback" not in done.stdout + done.stderr
    typed = re.findall(r"\$ lodestroke (.*)", done.stderr)
    names = [re.sub(r"^--logbook \S+ ", "", line).split()[0] for line in typed]
    assert (folder / "gentle" / "dry-run.html").is_file()
    assert (folder / "overdrive" / "dry-run.html").is_file()
    assert below(folder) == []
    if available() is not None:
        assert names == ["check", "dry-run", "dry-run"]
        assert "no" in done.stderr
        return
    assert names == [
        "check",
        "dry-run",
        "dry-run",
        "board",
        "flash",
        "endure",
        "endure",
        "log",
        "report",
    ]
    assert "interrupted" in done.stdout
    assert "target reached, 60 of 60 cycles, 1 resumes, 0 gaps" in done.stdout
    assert str(folder / "report.html") in done.stderr
    assert (folder / "report.html").stat().st_size > 10_000


@pytest.mark.slow
@pytest.mark.skipif(available() is not None, reason=f"no virtual board: {available()}")
def test_ctrl_c_in_the_demo_leaves_no_process(tmp_path: Path) -> None:
    folder = tmp_path / "demo"
    process = subprocess.Popen(
        [*DEMO, str(folder)], stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True
    )
    with process:
        try:
            until((folder / "bench.db").exists, 120.0)  # endure is under way
            process.send_signal(signal.SIGINT)
            assert process.wait(30) == 130
        finally:
            process.kill()
        assert process.stderr is not None
        assert "Traceback" not in process.stderr.read()
    assert below(folder) == []


def test_the_demo_wants_a_folder_of_its_own(tmp_path: Path) -> None:
    precious = tmp_path / "notes.txt"
    precious.write_text("mine")
    done = subprocess.run(
        [*DEMO, str(tmp_path)], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 2
    assert "--out" in done.stderr
    assert precious.read_text() == "mine"
