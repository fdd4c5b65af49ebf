"""A bench, its shipped schedules, and the same bench with its pressure limits out of the way."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from lodestroke.rig import Rig, load_rig

_PRESSURES = ("outlet_reverse", "outlet_high", "inlet_reverse", "chamber_high", "chamber_low")


def unguarded_text(text: str) -> str:
    """A rig file's text with every pressure limit at the end of its sensor's range."""
    for name in _PRESSURES:
        sign = "-" if name == "chamber_low" else ""
        wide = f'{name} = {{ soft = "{sign}89 cmH2O", hard = "{sign}90 cmH2O" }}'
        text, found = re.subn(rf"^{name} = \{{.*\}}$", wide, text, flags=re.M)
        assert found == 1, name
    return text


@pytest.fixture(scope="session")
def sim(shipped: Path) -> Rig:
    """The shipped simulated bench."""
    return load_rig(shipped / "bench-sim.toml")


@pytest.fixture(scope="session")
def weak_file(shipped: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A rig whose pressure limits protect nothing."""
    path = tmp_path_factory.mktemp("weak") / "weak.toml"
    text = (shipped / "bench-sim.toml").read_text(encoding="utf-8")
    path.write_text(unguarded_text(text), encoding="utf-8")
    return path
