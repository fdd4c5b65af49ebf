"""Raw sample rows in compressed, checksummed chunks that form a chain.

A chunk's chain value is SHA-256 over the chain so far, the chunk's own sum and what its row says of
it; the first chunk follows the run's id. So a chunk that is missing, doubled, swapped, altered, or
taken from another run shows.
"""

from __future__ import annotations

import hashlib
import struct
import time
import zlib

from lodeboard.wire import messages

ROW_BYTES = struct.calcsize(messages.SAMPLE_FORMAT)
CHUNK_ROWS = 8192
CODEC = "zlib"
AGE_S = 10.0  # a part-filled chunk waits no longer than this for the disk

_LEVEL = 1  # higher levels cost several times the time for a few per cent
_CHUNK_BYTES = CHUNK_ROWS * ROW_BYTES


def pack(rows: bytes) -> tuple[bytes, str]:
    """Compressed rows and the SHA-256 of the rows."""
    return zlib.compress(rows, _LEVEL), hashlib.sha256(rows).hexdigest()


def unpack(data: bytes, sha256: str, codec: str = CODEC) -> bytes:
    """The rows again. Raises ValueError when they are not what was written."""
    if codec != CODEC:
        raise ValueError(f"unknown codec {codec!r}")
    try:
        rows = zlib.decompress(data)
    except zlib.error as fault:
        raise ValueError(f"cannot be decompressed: {fault}") from fault
    if hashlib.sha256(rows).hexdigest() != sha256:
        raise ValueError("checksum differs")
    return rows


def link(chain: str, sha256: str, number: int, segment: int, first: int, last: int) -> str:
    """The chain after one more chunk."""
    text = f"{chain}:{sha256}:{number}:{segment}:{first}:{last}"
    return hashlib.sha256(text.encode()).hexdigest()


def ticks(rows: bytes) -> tuple[int, int]:
    """First and last tick of packed rows."""
    return (
        int.from_bytes(rows[:4], "little"),
        int.from_bytes(rows[-ROW_BYTES : 4 - ROW_BYTES], "little"),
    )


class Buffer:
    """Rows that wait to become chunks, in order; no chunk spans two segments of a run."""

    def __init__(self) -> None:
        self.waiting: list[tuple[int, bytearray]] = []
        self.since_s = 0.0

    def add(self, segment: int, rows: bytes) -> None:
        """Packed rows, one or many. Raises ValueError for a part of a row."""
        if len(rows) % ROW_BYTES:
            raise ValueError(f"{len(rows)} bytes are no whole rows of {ROW_BYTES}")
        if not rows:
            return
        if not self.waiting:
            self.since_s = time.monotonic()
        if not self.waiting or self.waiting[-1][0] != segment:
            self.waiting.append((segment, bytearray()))
        self.waiting[-1][1].extend(rows)

    def due(self, whole: bool) -> list[tuple[int, bytes]]:
        """Pieces to be written now, each a chunk's rows with their segment; drop() forgets them."""
        whole = whole or (bool(self.waiting) and time.monotonic() - self.since_s > AGE_S)
        pieces = []
        for at, (segment, rows) in enumerate(self.waiting):
            size = len(rows)
            if not whole and at == len(self.waiting) - 1:
                size -= size % _CHUNK_BYTES
            for start in range(0, size, _CHUNK_BYTES):
                pieces.append((segment, bytes(rows[start : min(start + _CHUNK_BYTES, size)])))
        return pieces

    def drop(self, pieces: list[tuple[int, bytes]]) -> None:
        """These are on disk now."""
        for _, piece in pieces:
            del self.waiting[0][1][: len(piece)]
            if not self.waiting[0][1]:
                del self.waiting[0]
        if pieces:
            self.since_s = time.monotonic()
