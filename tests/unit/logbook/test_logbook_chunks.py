"""Sample chunks: what goes in comes out, and what was altered does not.

Checks from outside: hashlib's SHA-256 (FIPS 180-4) and zlib (RFC 1950) of the standard library.
"""

from __future__ import annotations

import contextlib
import hashlib
import zlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from lodestroke.logbook import chunks

ROWS = st.integers(0, 40).flatmap(
    lambda count: st.binary(min_size=count * chunks.ROW_BYTES, max_size=count * chunks.ROW_BYTES)
)


@given(ROWS)
def test_chunk_gives_back_what_was_packed(rows: bytes) -> None:
    data, sha256 = chunks.pack(rows)
    assert chunks.unpack(data, sha256) == rows
    assert zlib.decompress(data) == rows
    assert hashlib.sha256(rows).hexdigest() == sha256


@given(ROWS, st.data())
def test_chunk_is_refused_when_any_byte_was_altered(rows: bytes, data: st.DataObject) -> None:
    packed, sha256 = chunks.pack(rows)
    at = data.draw(st.integers(0, len(packed) - 1))
    flipped = bytearray(packed)
    flipped[at] ^= data.draw(st.integers(1, 255))
    with contextlib.suppress(ValueError):
        assert chunks.unpack(bytes(flipped), sha256) == rows  # a flag bit that changes nothing


@given(ROWS, st.integers(1, 40))
def test_chunk_is_refused_when_it_was_cut_short(rows: bytes, cut: int) -> None:
    packed, sha256 = chunks.pack(rows)
    with pytest.raises(ValueError, match=r"decompress|checksum"):
        chunks.unpack(packed[: max(len(packed) - cut, 0)], sha256)


def test_chunk_of_an_unknown_codec_is_refused() -> None:
    data, sha256 = chunks.pack(b"x" * 28)
    with pytest.raises(ValueError, match="codec"):
        chunks.unpack(data, sha256, "later")


@given(st.lists(st.tuples(st.integers(1, 3), st.integers(1, 9000)), max_size=8), st.booleans())
def test_buffer_keeps_every_row_in_order_and_segments_apart(
    adds: list[tuple[int, int]], whole: bool
) -> None:
    buffer = chunks.Buffer()
    given_rows: list[tuple[int, bytes]] = []
    serial = 0
    out: list[tuple[int, bytes]] = []
    for segment, count in adds:
        rows = b"".join(
            number.to_bytes(4, "little") + bytes(24) for number in range(serial, serial + count)
        )
        serial += count
        buffer.add(segment, rows)
        given_rows.append((segment, rows))
        pieces = buffer.due(whole)
        buffer.drop(pieces)
        out += pieces
    out += buffer.due(whole=True)
    assert b"".join(rows for _, rows in out) == b"".join(rows for _, rows in given_rows)
    assert all(len(rows) <= chunks.CHUNK_ROWS * chunks.ROW_BYTES for _, rows in out)
    changes = [segment for segment, _ in given_rows]
    assert [s for i, s in enumerate(changes) if i == 0 or changes[i - 1] != s] == _changes(out)


def _changes(pieces: list[tuple[int, bytes]]) -> list[int]:
    found: list[int] = []
    for segment, _ in pieces:
        if not found or found[-1] != segment:
            found.append(segment)
    return found


def test_buffer_keeps_what_a_failed_flush_did_not_write() -> None:
    buffer = chunks.Buffer()
    buffer.add(1, bytes(56))
    assert buffer.due(whole=True) == buffer.due(whole=True) == [(1, bytes(56))]


def test_buffer_holds_a_small_rest_back_until_it_is_old(monkeypatch: pytest.MonkeyPatch) -> None:
    buffer = chunks.Buffer()
    buffer.add(1, bytes(56))
    assert buffer.due(whole=False) == []
    monkeypatch.setattr(chunks, "AGE_S", -1.0)
    assert buffer.due(whole=False) == [(1, bytes(56))]


def test_buffer_refuses_a_part_of_a_row() -> None:
    with pytest.raises(ValueError, match="no whole rows"):
        chunks.Buffer().add(1, bytes(27))
