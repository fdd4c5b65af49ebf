"""Stored files: a power cut at any byte leaves the old or the new content, never anything else."""

import binascii
import struct
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from lodeboard.store import DATA_MAX, Store, pack, unpack


@pytest.fixture
def store(tmp_path: Path) -> Store:
    return Store(str(tmp_path / "store"))


def test_load_gives_none_when_nothing_was_saved(store: Store) -> None:
    assert store.load("trip") is None


def test_load_gives_what_was_saved_last(store: Store) -> None:
    for content in (b"one", b"", b"three" * 50):
        store.save("trip", content)
        assert store.load("trip") == content


def test_names_do_not_mix(store: Store) -> None:
    store.save("trip", b"t")
    store.save("calibration", b"c")
    assert (store.load("trip"), store.load("calibration")) == (b"t", b"c")


def test_every_truncation_of_the_newest_copy_gives_old_or_new(store: Store) -> None:
    """A cut while the second save is written: every length that may have reached the flash."""
    store.save("trip", b"old content")
    store.save("trip", b"new content!")
    files = sorted(Path(store.folder).iterdir())
    newest = max(files, key=lambda path: unpack(path.read_bytes())[0])
    whole = newest.read_bytes()
    for length in range(len(whole) + 1):
        newest.write_bytes(whole[:length])
        expected = b"new content!" if length == len(whole) else b"old content"
        assert store.load("trip") == expected
        newest.write_bytes(whole)


def test_a_save_after_a_cut_is_kept_and_spares_the_whole_copy(store: Store) -> None:
    store.save("trip", b"old")
    store.save("trip", b"torn")
    copies = {path: unpack(path.read_bytes()) for path in Path(store.folder).iterdir()}
    newest = max(copies, key=lambda path: copies[path][0])
    oldest = min(copies, key=lambda path: copies[path][0])
    newest.write_bytes(newest.read_bytes()[:7])
    before = oldest.read_bytes()
    store.save("trip", b"next")
    assert store.load("trip") == b"next"
    assert oldest.read_bytes() == before


def test_too_long_a_file_is_refused(store: Store) -> None:
    with pytest.raises(ValueError, match="too long"):
        store.save("trip", bytes(DATA_MAX + 1))


@given(sequence=st.integers(1, 2**32 - 1), data=st.binary(max_size=200))
def test_a_copy_is_as_documented(sequence: int, data: bytes) -> None:
    """Checked against CRC-32 of IEEE 802.3 as binascii has it, over the bytes laid out by hand."""
    raw = pack(sequence, data)
    assert raw[:2] == b"LS"
    assert raw[2:8] == struct.pack("<IH", sequence, len(data))
    assert raw[8:12] == struct.pack("<I", binascii.crc32(struct.pack("<I", sequence) + data))
    assert unpack(raw) == (sequence, data)


@given(data=st.binary(min_size=1, max_size=60), at=st.integers(0, 2**16), bit=st.integers(0, 7))
def test_a_flipped_bit_is_found(data: bytes, at: int, bit: int) -> None:
    raw = bytearray(pack(7, data))
    raw[at % len(raw)] ^= 1 << bit
    assert unpack(bytes(raw)) == (0, None)


@given(raw=st.binary(max_size=80))
def test_any_bytes_are_read_without_an_error(raw: bytes) -> None:
    sequence, data = unpack(raw)
    assert data is None or pack(sequence, data) == raw
