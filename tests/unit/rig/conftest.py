"""Shipped rig files, edited for a test."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from lodestroke.rig import Rig, load_rig

CONFIGS = Path(__file__).parents[3] / "hil_configs"
Edit = Callable[..., Path]


@pytest.fixture(scope="session")
def bench() -> Rig:
    """The simulated bench."""
    return load_rig(CONFIGS / "bench-sim.toml")


@pytest.fixture
def edit(tmp_path: Path) -> Edit:
    """edit(("old", "new"), ...) writes a shipped rig file with these replaced, once each."""
    def write(*changes: tuple[str, str], name: str = "bench-sim.toml") -> Path:
        text = (CONFIGS / name).read_text(encoding="utf-8")
        for old, new in changes:
            assert old in text, old
            text = text.replace(old, new, 1)
        path = tmp_path / "bench.toml"
        path.write_text(text, encoding="utf-8")
        return path
    return write
