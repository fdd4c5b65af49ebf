"""What a board tells the host, as the client hands it on."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True)
class BoardInfo:
    """The board's hello: who it is and how it stands."""

    wire_version: int
    bundle_id: bytes
    fingerprint: bytes
    board_id: bytes
    boot_nonce: int
    run_token: int
    oldest_entry: int
    state: str
    capabilities: int


@dataclass(frozen=True)
class Sample:
    """One sample row, still packed (lodestroke.rows.SAMPLE decodes it)."""

    body: bytes


@dataclass(frozen=True)
class Entry:
    """A journal entry, in order and never twice: kind is cycle, mark, trip, end or gap."""

    kind: str
    entry: int
    fields: dict[str, int] = field(default_factory=dict)


@dataclass(frozen=True)
class Beat:
    """A sign of life; `state` in words."""

    state: str
    fields: dict[str, int]


@dataclass(frozen=True)
class Recorded:
    """A row of the flight recorder, oldest = 0."""

    row: int
    body: bytes


@dataclass(frozen=True)
class Text:
    """What the board printed outside frames: a traceback, say."""

    text: str


@dataclass(frozen=True)
class Restarted:
    """The board's boot nonce changed under us: it was reset or lost power."""

    info: BoardInfo


@dataclass(frozen=True)
class Reply:
    """The answer to a command; the client consumes it."""

    down_frame: int
    command: int
    result: int
    detail: int


Event = Sample | Entry | Beat | Recorded | Text | Restarted
