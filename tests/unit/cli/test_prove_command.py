"""`prove` as typed, and `dry-run --replay` of what it wrote."""

from __future__ import annotations

import json
import os
import re
import signal
import threading
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from lodestroke.errors import Exit

if TYPE_CHECKING:
    from conftest import Run

CONFIGS = Path(__file__).resolve().parents[3] / "hil_configs"
SIM = CONFIGS / "bench-sim.toml"
GENTLE = CONFIGS / "schedules" / "gentle.toml"
OVERDRIVE = CONFIGS / "schedules" / "overdrive.toml"


@pytest.fixture
def weak(tmp_path: Path) -> Path:
    """The bench with its pressure limits out of the way."""
    text = SIM.read_text(encoding="utf-8")
    for name in ("outlet_reverse", "outlet_high", "inlet_reverse", "chamber_high", "chamber_low"):
        sign = "-" if name == "chamber_low" else ""
        wide = f'{name} = {{ soft = "{sign}89 cmH2O", hard = "{sign}90 cmH2O" }}'
        text = re.sub(rf"^{name} = \{{.*\}}$", wide, text, flags=re.M)
    path = tmp_path / "weak.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_a_rig_that_holds_ends_with_0_and_writes_no_case(lodestroke: Run, tmp_path: Path) -> None:
    case = tmp_path / "case.toml"
    ended = lodestroke("prove", SIM, OVERDRIVE, "--tries", 3, "--out", case, "--json")
    assert ended.code == 0
    answer = json.loads(ended.out)
    assert (answer["end"], answer["cases"], answer["file"]) == ("held", 3, None)
    assert not case.exists()


def test_a_failure_is_told_written_and_replays_to_the_same(
    lodestroke: Run, weak: Path, tmp_path: Path
) -> None:
    case = tmp_path / "case.toml"
    ended = lodestroke("prove", weak, OVERDRIVE, "--tries", 3, "--out", case, "--json")
    assert ended.code == Exit.PROOF_FAILED
    answer = json.loads(ended.out)
    assert answer["file"] == str(case)
    assert ended.parts()["what"] == "an invariant did not hold: margin stays"
    replayed = lodestroke("dry-run", weak, OVERDRIVE, "--replay", case)
    assert replayed.code == Exit.PROOF_FAILED
    for part in ("what", "got", "bound"):
        assert replayed.parts()[part] == ended.parts()[part]
    assert lodestroke("dry-run", SIM, OVERDRIVE, "--replay", case).code == Exit.TRIPPED


def test_a_case_that_cannot_be_read_or_written_is_bad_input(
    lodestroke: Run, tmp_path: Path
) -> None:
    ended = lodestroke("dry-run", SIM, GENTLE, "--replay", tmp_path / "none.toml")
    assert ended.code == Exit.BAD_INPUT
    assert "cannot read the case file" in ended.err
    ended = lodestroke("prove", SIM, GENTLE, "--out", tmp_path / "no" / "case.toml")
    assert ended.code == Exit.BAD_INPUT
    assert set(ended.parts()) == {"what", "at", "got", "bound", "try"}


def test_ctrl_c_ends_with_130_and_what_was_proved_so_far(lodestroke: Run, tmp_path: Path) -> None:
    timer = threading.Timer(1.5, os.kill, (os.getpid(), signal.SIGINT))
    timer.start()
    out = tmp_path / "case.toml"
    ended = lodestroke("prove", SIM, OVERDRIVE, "--tries", 100_000, "--out", out, "--json")
    timer.cancel()
    assert ended.code == Exit.INTERRUPTED
    answer = json.loads(ended.out)
    assert answer["end"] == "interrupted"
    assert f"held in {answer['cases']} cases" in ended.err
