"""What a rig file left out, and what stands in its place."""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel

from ..units import show
from .locate import Path
from .models import Rig
from .problems import key_text
from .toml_file import unit_of

# What the board gets where None means "worked out from the rest".
WORKED_OUT = {
    "stuck": "200 ticks where the noise is half a count or more, else not watched",
    "jump": "not watched",
    "coil_open_current": "a tenth of limits.current, clear of the sensor's noise",
    "supply_low": "not watched",
    "deadman": "needed on real boards",
    "density": "the named liquid's", "viscosity": "the named liquid's",
}


_PLAIN = ("name", "title", "kind")     # words that need no telling


def defaults_used(rig: Rig) -> dict[str, str]:
    """Key -> default as text with its unit, for every key that the file left out."""
    found: dict[str, str] = {}
    for name in Rig.model_fields:
        if name != "source":
            _look(getattr(rig, name), (name,), name not in rig.model_fields_set, found)
    return found


def _look(value: Any, path: Path, left_out: bool, found: dict[str, str]) -> None:
    """Walk tables and lists; `left_out` when a whole section was."""
    if isinstance(value, list):
        for i, item in enumerate(value):
            _look(item, (*path, i), left_out, found)
    elif isinstance(value, BaseModel):
        for name, info in type(value).model_fields.items():
            inner = getattr(value, name)
            missing = left_out or name not in value.model_fields_set
            if isinstance(inner, BaseModel | list):
                _look(inner, (*path, name), missing, found)
            elif missing and name not in _PLAIN and not _silent(path, name, inner):
                found[key_text((*path, name))] = _text(
                    name, inner, unit_of(info.annotation, info.metadata))


def _silent(path: Path, name: str, value: Any) -> bool:
    """Optional parts that are simply not there."""
    return value is None and (path[:2] == ("board", "pins") or name not in WORKED_OUT)


def _text(name: str, value: Any, unit: str | None) -> str:
    if value is None:
        return WORKED_OUT[name]
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return show(value, unit or "")
    return f'"{value}"' if isinstance(value, str) else str(value)
