"""Packing and unpacking of message bodies by the table that both ends share."""

from __future__ import annotations

import struct

from lodeboard import states
from lodeboard.wire import messages

from .events import Beat, BoardInfo, Entry, Event, Recorded, Reply, Sample

_UP = {code: (name, form, fields) for code, name, form, fields in messages.UP}
_DOWN = {name: (code, form, fields) for code, name, form, fields in messages.DOWN}
_SAMPLE = next(code for code, row in _UP.items() if row[0] == "sample")
_HELLO = next(code for code, row in _UP.items() if row[0] == "hello")
_SIZES = {code: struct.calcsize(row[1]) for code, row in _UP.items()}
JOURNAL = ("cycle", "mark", "trip", "end", "gap")


def pack_down(name: str, fields: dict[str, int | bytes]) -> tuple[int, bytes]:
    """The code and body of a command."""
    code, form, names = _DOWN[name]
    return code, struct.pack(form, *(fields[key] for key in names))


def command_name(code: int) -> str:
    """The name of a down message."""
    return next((name for name, row in _DOWN.items() if row[0] == code), f"0x{code:02X}")


def state_name(code: int) -> str:
    """A state in words."""
    return states.NAMES[code] if code < len(states.NAMES) else f"state {code}"


def unpack_up(code: int, body: bytes) -> Event | BoardInfo | Reply | None:
    """An up message as an event; None for one that this version does not know."""
    if code == _SAMPLE and len(body) == _SIZES[_SAMPLE]:
        return Sample(body)
    row = _UP.get(code)
    if row is None:
        return None
    if len(body) != _SIZES[code]:
        return _foreign(body) if code == _HELLO and len(body) >= 4 else None
    name, form, names = row
    values = dict(zip(names, struct.unpack(form, body), strict=True))
    if name in JOURNAL:
        return Entry(name, values["entry"], values)
    if name == "hello":
        values["state"] = state_name(values["state"])
        return BoardInfo(**values)
    if name == "reply":
        return Reply(**values)
    if name == "recorded":
        return Recorded(values["row"], body[2:])
    return Beat(state_name(values["state"]), values)


def _foreign(body: bytes) -> BoardInfo:
    """The hello of another version: only its first field, the version, stands for certain."""
    (version,) = struct.unpack_from("<I", body)
    return BoardInfo(version, b"", b"", b"", 0, 0, 1, "unknown", 0)
