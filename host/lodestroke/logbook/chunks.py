"""Raw sample rows in compressed, checksummed chunks that form a chain.

A chunk's chain value is SHA-256 over the chain so far and the chunk's own sum, so that a chunk that
is missing, doubled, swapped or altered shows.
"""

from __future__ import annotations

import hashlib
import zlib

_LEVEL = 1  # samples compress about fivefold at the fastest level; higher levels gain little


def pack(rows: bytes) -> tuple[bytes, str]:
    """Compressed rows and the SHA-256 of the rows."""
    return zlib.compress(rows, _LEVEL), hashlib.sha256(rows).hexdigest()


def unpack(data: bytes, sha256: str) -> bytes:
    """The rows again. Raises ValueError when they are not what was written."""
    try:
        rows = zlib.decompress(data)
    except zlib.error as fault:
        raise ValueError(f"cannot be decompressed: {fault}") from fault
    if hashlib.sha256(rows).hexdigest() != sha256:
        raise ValueError("checksum differs")
    return rows


def link(chain: str, sha256: str) -> str:
    """The chain after one more chunk."""
    return hashlib.sha256(f"{chain}:{sha256}".encode()).hexdigest()
