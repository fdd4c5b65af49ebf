"""What every test shares: the option that names a real board, and a logbook of nobody's."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import pytest


def pytest_addoption(parser: pytest.Parser) -> None:
    """--rig and --port: run the bench tests on a real board too."""
    group = parser.getgroup("lodestroke")
    group.addoption(
        "--rig",
        metavar="RIG",
        help="rig file of a real board that carries our firmware "
        "and may be energised: the bench tests run on it too",
    )
    group.addoption(
        "--port", metavar="PORT", help="its serial port; otherwise the rig's USB serial number"
    )


@pytest.fixture(scope="session", autouse=True)
def _no_users_logbook(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """No test, and no process that a test starts, ever writes into a user's own logbook."""
    before = os.environ.get("LODESTROKE_LOGBOOK")
    os.environ["LODESTROKE_LOGBOOK"] = str(tmp_path_factory.mktemp("logbook") / "default.db")
    yield
    if before is None:
        del os.environ["LODESTROKE_LOGBOOK"]
    else:
        os.environ["LODESTROKE_LOGBOOK"] = before


@pytest.fixture(scope="session")
def shipped() -> Path:
    """The folder of shipped rigs, schedules and plans."""
    return Path(__file__).resolve().parents[1] / "hil_configs"
