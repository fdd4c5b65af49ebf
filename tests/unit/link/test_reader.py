"""Both readers octet by octet: resynchronising, text, damage, a stray Ctrl-C."""

from __future__ import annotations

import itertools
import random

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scripted import cycle, raw_frame, sample

from lodeboard.wire.frames import DownReader, UpReader, build_down


def feed(reader: DownReader, data: bytes) -> list[bytes]:
    """The contents of every frame that is whole."""
    found = []
    for octet in data:
        n = reader.feed(octet)
        if n:
            found.append(bytes(reader.buf[:n]))
    return found


SEAL = build_down(0x43, 7, b"0123456789abcde")


def test_board_takes_the_next_frame_after_any_damage_to_one():
    for at in range(len(SEAL)):
        for bit in range(8):
            reader = DownReader()
            spoilt = bytearray(SEAL)
            spoilt[at] ^= 1 << bit
            found = feed(reader, bytes(spoilt) + SEAL + SEAL)
            assert found[-1] == b"\x43\x07" + b"0123456789abcde"
            assert len(found) <= 3
            assert not reader.interrupt, (at, bit)


def test_board_takes_the_next_frame_after_one_that_was_cut_anywhere():
    for cut in range(len(SEAL)):
        reader = DownReader()
        assert feed(reader, SEAL[:cut] + SEAL + SEAL)[-1][0] == 0x43


def test_board_drops_a_frame_longer_than_any_and_counts_it():
    reader = DownReader()
    assert feed(reader, b"~" + b"A" * 500 + b"~") == []
    assert reader.damaged == 1
    assert len(feed(reader, SEAL)) == 1


def test_frame_that_ends_in_an_escape_is_dropped():
    # RFC 1662, 4.3: a frame that ends in escape and flag is invalid
    reader = DownReader()
    assert feed(reader, SEAL[:-1] + b"\x7d\x7e") == []
    assert reader.damaged == 1


@pytest.mark.parametrize("before", [b"", SEAL, b"\r", b"print", b"~~\r"])
def test_bare_ctrl_c_is_noticed_outside_frames(before):
    reader = DownReader()
    feed(reader, before)
    if before != b"print":
        feed(reader, b"\x03")
        assert reader.interrupt
    else:                                     # what may be the start of a frame is dropped first
        feed(reader, b"\x03")
        assert not reader.interrupt
        feed(reader, b"\x03")
        assert reader.interrupt


@pytest.mark.parametrize("inside", [SEAL[:1], SEAL[:5], SEAL[:-1]])
def test_ctrl_c_in_the_place_of_a_frames_octet_is_damage(inside):
    reader = DownReader()
    feed(reader, inside + b"\x03")
    assert not reader.interrupt
    assert reader.damaged == 1


@given(st.integers(0, 255), st.integers(0, 255), st.binary(max_size=40))
def test_frame_of_any_content_goes_down_whole(code, number, body):
    assert feed(DownReader(), build_down(code, number, body)) == [bytes([code, number]) + body]


@given(st.lists(st.one_of(
    st.binary(max_size=30).map(lambda text: bytes(octet & 0x7F for octet in text)),
    st.integers(0, 255).map(lambda k: sample(k, k)),
    st.integers(1, 99).map(lambda k: cycle(k, k)),
), max_size=12), st.lists(st.integers(0, 400), max_size=8))
def test_text_and_frames_part_cleanly_however_the_bytes_are_cut(parts, cuts):
    data = b"".join(parts)
    reader = UpReader()
    frames, text = [], b""
    edges = [0, *sorted(min(cut, len(data)) for cut in cuts), len(data)]
    for start, end in itertools.pairwise(edges):
        frames += reader.feed(data[start:end])
        text += reader.take_text()
    assert [raw_frame(*frame) for frame in frames] == [
        part for part in parts if part[:1] == b"\xa5"]
    assert text == b"".join(part for part in parts if part[:1] != b"\xa5")


@given(st.integers(0, 7), st.integers(0, 40), st.integers(0, 255))
def test_host_loses_only_the_frame_that_was_damaged(bit, at, number):
    one, two, three = (sample((number + k) & 255, k) for k in range(3))
    spoilt = bytearray(two)
    spoilt[at % len(two)] ^= 1 << bit
    reader = UpReader()
    # a damaged length may swallow what follows until enough has come to show that it was wrong
    found = reader.feed(one + bytes(spoilt) + three) + reader.feed(b"\n" * 64)
    assert [raw_frame(*frame) for frame in found] == [one, three]


def test_200_000_random_octets_and_frames_raise_nothing_and_make_no_false_frame():
    dice = random.Random(20261201)
    up, down = UpReader(), DownReader()
    sent = got = octets = 0
    while octets < 200_000:
        junk = dice.randbytes(dice.randrange(60))
        frame = sample(sent & 255, sent) if dice.random() < 0.5 else b""
        octets += len(junk) + len(frame)
        sent += bool(frame)
        # a stray 0xA5 before a frame may hide it for a while, never for good: sync needs a whole CRC
        for code, _, body in up.feed(junk + frame):
            got += 1
            assert code == 0x83
            assert len(body) == 28
        for octet in junk + frame:
            assert down.feed(octet) == 0
    assert got + 2 >= sent
    assert up.damaged > 50
    assert down.damaged > 50
