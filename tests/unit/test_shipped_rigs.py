"""The shipped rigs describe one pump, and every shipped file is found wherever it is installed."""

from __future__ import annotations

import pytest

from lodestroke.rig import load_rig
from lodestroke.shipped import boot_dir, firmware_dir, hil_configs_dir

PUMP = (
    "driver", "coils", "slug", "channel", "spring", "chamber", "inlet", "outlet", "fluid",
    "ambient", "valves", "tolerances", "drift",
)


BOARDS = ("rp2040", "esp32", "stm32")


@pytest.mark.parametrize("board", BOARDS)
def test_the_real_boards_rig_has_the_simulated_rigs_pump(board: str) -> None:
    simulated = load_rig(hil_configs_dir() / "bench-sim.toml")
    real = load_rig(hil_configs_dir() / f"bench-{board}.toml")
    assert [part for part in PUMP if getattr(simulated, part) != getattr(real, part)] == []


@pytest.mark.parametrize("board", BOARDS)
def test_the_real_boards_rig_demands_a_deadman_or_has_a_one_shot(board: str) -> None:
    rig = load_rig(hil_configs_dir() / f"bench-{board}.toml")
    assert rig.board.pins is not None
    assert rig.limits.deadman is (rig.board.pins.one_shot is None)


def test_shipped_files_are_where_they_are_looked_for() -> None:
    assert {path.name for path in boot_dir().glob("*.py")} == {"main.py", "slots.py"}
    assert (firmware_dir() / "lodeboard" / "board.py").is_file()
    assert (hil_configs_dir() / "schedules" / "gentle.toml").is_file()
