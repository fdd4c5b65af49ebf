"""Where the files lie that come with the package but are no Python of ours: boot files, rigs."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

import lodeboard

from .errors import Unavailable


def _first(candidates: list[Path], what: str) -> Path:
    for path in candidates:
        if path.is_dir():
            return path
    raise Unavailable(
        f"the {what} are not where they should be", at=" or ".join(str(p) for p in candidates),
        try_="install the package again",
    )


def _repository() -> Path:
    """The folder above firmware/, when the package runs out of a clone."""
    return firmware_dir().parent


def firmware_dir() -> Path:
    """The folder that holds the package `lodeboard`."""
    return Path(str(lodeboard.__file__)).resolve().parent.parent


def boot_dir() -> Path:
    """main.py and slots.py for a board. Raises Unavailable."""
    shipped = Path(str(resources.files("lodestroke"))) / "_shipped"
    return _first([shipped / "boot", _repository() / "firmware" / "boot"], "boot files")


def hil_configs_dir() -> Path:
    """The shipped rigs, with schedules and plans beside them. Raises Unavailable."""
    shipped = Path(str(resources.files("lodestroke"))) / "_shipped"
    return _first([shipped / "hil_configs", _repository() / "hil_configs"], "shipped rigs")
