"""A rig file in, a Rig out; everything that is wrong with the file is told at once."""

from __future__ import annotations

from pathlib import Path

from ..errors import RigError
from .checks import rig_problems
from .models import Rig
from .toml_file import read_fields, read_toml


def load_rig(path: str | Path) -> Rig:
    """Read, validate and judge a rig file.

    Raises RigError for a file that cannot be read or is not TOML, for unknown keys, wrong units,
    values out of bounds, and values that no bench can have; it lists all problems with their lines.
    """
    document = read_toml(path, RigError, "rig")
    good = read_fields(Rig, document)
    document.problems.extend(rig_problems(good))
    document.raise_if_any()
    given = {name: value for name, value in good.items() if name in document.data}
    return Rig(**given, source=document.path.resolve())
