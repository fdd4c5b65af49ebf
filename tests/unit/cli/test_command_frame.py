"""The frame around all commands: help, near names, codes, five parts, faults of ours."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING

import click
import pytest

from lodestroke import __version__
from lodestroke.cli import main as frame
from lodestroke.errors import Exit

if TYPE_CHECKING:
    from conftest import Run

HEAVY = {
    "numpy",
    "pint",
    "pydantic",
    "rich",
    "sqlalchemy",
    "serial",
    "plotly",
    "numba",
    "pyarrow",
    "jinja2",
    "mpremote",
    "lodeboard",
}


def test_help_lists_every_command_and_imports_nothing_heavy() -> None:
    script = (
        "import sys; sys.argv = ['lodestroke', '--help']\n"
        "from lodestroke.cli.main import main\n"
        "try:\n    main()\nexcept SystemExit:\n    pass\n"
        "print('modules', *sorted({name.partition('.')[0] for name in sys.modules}))\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, timeout=60, check=True
    )
    text, _, modules = done.stdout.rpartition("modules ")
    assert HEAVY & set(modules.split()) == set()
    for name in frame.COMMANDS:
        assert f"  {name} " in text


@pytest.mark.parametrize("name", frame.COMMANDS)
def test_each_command_has_help_and_a_module_of_its_own(lodestroke: Run, name: str) -> None:
    ended = lodestroke(name, "--help")
    assert ended.code == 0
    assert ended.out.startswith(f"Usage: lodestroke {name}")


def test_version_is_the_packages(lodestroke: Run) -> None:
    assert lodestroke("--version").out.strip() == f"lodestroke, version {__version__}"


@pytest.mark.parametrize(
    ("typed", "meant"),
    [("endur", "endure"), ("dryrun", "dry-run"), ("reprot", "report"), ("flsh", "flash")],
)
def test_an_unknown_command_gets_the_nearest_name(lodestroke: Run, typed: str, meant: str) -> None:
    ended = lodestroke(typed)
    assert ended.code == Exit.BAD_INPUT
    assert f"Did you mean '{meant}'?" in ended.err


def test_an_unknown_option_and_a_missing_argument_are_bad_input(lodestroke: Run) -> None:
    assert lodestroke("dry-run", "--sead", "1").code == Exit.BAD_INPUT
    assert "RIG" in lodestroke("dry-run").err
    assert lodestroke("dry-run", "a", "b", "--seed", "many").code == Exit.BAD_INPUT


def test_a_fault_of_ours_is_one_message_with_its_details_in_a_file(
    lodestroke: Run, monkeypatch: pytest.MonkeyPatch
) -> None:
    @click.command()
    def broken() -> None:
        raise ZeroDivisionError("all of it")

    monkeypatch.setattr(frame.Lazy, "get_command", lambda *_: broken)
    ended = lodestroke("check")
    assert ended.code == Exit.INTERNAL
    parts = ended.parts()
    assert parts["got"] == "ZeroDivisionError: all of it"
    file = Path(parts["try"].rpartition(" ")[2])
    assert "Traceback" in file.read_text(encoding="utf-8")
    file.unlink()


@pytest.mark.parametrize("how", [signal.SIGINT, signal.SIGTERM])
def test_ctrl_c_and_sigterm_end_a_command_with_their_code(how: signal.Signals) -> None:
    script = (
        "import os, sys, click; from lodestroke.cli import main as frame\n"
        "@click.command()\ndef slow():\n"
        f"    os.kill(os.getpid(), {int(how)})\n    import time; time.sleep(30)\n"
        "frame.Lazy.get_command = lambda *_: slow\n"
        "sys.argv = ['lodestroke', 'check']; frame.main()\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == Exit.INTERRUPTED
    assert done.stderr.strip().splitlines()[0] == "interrupted"


def test_json_errors_are_one_object_with_the_five_parts(lodestroke: Run, tmp_path: Path) -> None:
    ended = lodestroke("dry-run", tmp_path / "no.toml", "no.toml", "--json")
    assert ended.code == Exit.BAD_INPUT
    answer = json.loads(ended.out)
    assert set(answer) == {"error", "what", "at", "got", "bound", "try"}
    assert answer["error"] == "RigError"
