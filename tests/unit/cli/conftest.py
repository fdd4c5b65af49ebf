"""The command as a user gets it, in this process: exit code, standard output, standard error."""

from __future__ import annotations

import signal
import sys
from collections.abc import Callable
from typing import NamedTuple

import pytest

from lodestroke.cli.main import main


class Ended(NamedTuple):
    """How a command ended."""

    code: int
    out: str
    err: str

    def parts(self) -> dict[str, str]:
        """The five parts of its error."""
        lines = self.err.strip().splitlines()
        at = next(i for i, line in enumerate(lines) if line.startswith("  at    "))
        found = {"what": lines[at - 1]}
        for line in lines[at:]:
            if line[:2] == "  " and line[2] != " ":
                label, _, text = line.strip().partition(" ")
                found[label] = text.strip()
        return found


Run = Callable[..., Ended]


@pytest.fixture
def lodestroke(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Run:
    """lodestroke("check", "rig.toml") runs the command."""

    def run(*words: object) -> Ended:
        monkeypatch.setattr(sys, "argv", ["lodestroke", *map(str, words)])
        capsys.readouterr()
        code = 0
        handler = signal.getsignal(signal.SIGTERM)
        try:
            main()
        except SystemExit as leaving:
            code = int(leaving.code or 0)
        finally:
            signal.signal(signal.SIGTERM, handler)
        out, err = capsys.readouterr()
        assert "Traceback" not in out + err
        return Ended(code, out, err)

    return run
