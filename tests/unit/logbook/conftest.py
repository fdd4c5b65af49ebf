"""A logbook of the test's own."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from lodestroke.logbook import Logbook, open_logbook


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """Where the test's logbook is."""
    return tmp_path / "bench.db"


@pytest.fixture
def log(path: Path) -> Iterator[Logbook]:
    """An empty logbook."""
    with open_logbook(path) as logbook:
        yield logbook
