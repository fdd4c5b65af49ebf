"""The simulated bench, and schedules written for a test."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from lodestroke.rig import Rig, load_rig

CONFIGS = Path(__file__).parents[3] / "hil_configs"
WAVES = """
[waves.soft]
rise = "20 ms"
hold = "80 ms"
fall = "20 ms"
rest = "130 ms"
current = "1 A"
"""


@pytest.fixture(scope="session")
def bench() -> Rig:
    """The simulated bench."""
    return load_rig(CONFIGS / "bench-sim.toml")


@pytest.fixture
def write(tmp_path: Path) -> Callable[..., Path]:
    """write(text) puts a schedule (with the wave "soft") into a file."""
    def put(text: str, name: str = "s.toml", waves: str = WAVES) -> Path:
        path = tmp_path / name
        path.write_text(waves + text, encoding="utf-8")
        return path
    return put
