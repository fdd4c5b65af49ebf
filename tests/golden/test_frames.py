"""Frames byte by byte, and the CRC against its published check value, on every implementation."""

from __future__ import annotations

import binascii
import subprocess

import pytest
from hypothesis import given
from hypothesis import strategies as st

from lodeboard.wire import crc, frames, messages

# CRC-32/ISO-HDLC check values: "123456789" → 0xCBF43926 (Koopman; the CRC RevEng catalogue), the
# others by binascii of CPython, an implementation of its own (zlib).
VECTORS = [
    (b"", 0x00000000), (b"123456789", 0xCBF43926), (b"\x00" * 4, 0x2144DF1C),
    (b"\xff" * 32, 0xFF6CAB0B), (bytes(range(56)), binascii.crc32(bytes(range(56)))),
]


@pytest.mark.parametrize(("data", "value"), VECTORS)
def test_crc_halves_meet_the_published_values(data, value):
    work = crc.make_table()
    crc.halves(bytearray(data), 0, len(data), work)
    assert work[512] | work[513] << 16 == value
    assert binascii.crc32(data) == value


@given(st.binary(max_size=80), st.integers(0, 5))
def test_seal_and_holds_agree_with_binascii(data, start):
    buf = bytearray(start) + bytearray(data) + bytearray(4)
    crc.seal(buf, start, len(data))
    assert buf[start + len(data) :] == binascii.crc32(data).to_bytes(4, "little")
    assert crc.holds(buf, start, len(data))
    buf[start + len(data)] ^= 1
    assert not crc.holds(buf, start, len(data))


def test_crc_on_the_real_interpreter_uses_the_fast_loop_and_gives_the_same():
    import sys
    from pathlib import Path

    sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "mpy"))
    from interpreter import FIRMWARE, interpreter

    script = (
        "import sys\nsys.path.insert(0, sys.argv[1])\n"
        "from lodeboard.wire import crc, crc_fast\n"
        "assert crc._halves is crc_fast.halves\n"
        "for text in sys.argv[2:]:\n"
        " data = bytes(int(text[i:i+2], 16) for i in range(0, len(text) // 2 * 2, 2))\n"
        " for halves in (crc.halves, crc_fast.halves):\n"
        "  crc._work[512] = 0\n"
        "  halves(bytearray(data), 0, len(data), crc._work)\n"
        "  print('%04x%04x' % (crc._work[513], crc._work[512]))\n")
    texts = [data.hex() or "-" for data, _ in VECTORS]
    with_script = Path(__file__).with_name("_crc_script.py")
    with_script.write_text(script)
    try:
        said = subprocess.run([interpreter(), str(with_script), str(FIRMWARE), *texts],
                              capture_output=True, text=True, check=True).stdout.split()
    finally:
        with_script.unlink()
    assert said == [f"{value:08x}" for _, value in VECTORS for _ in range(2)]


def test_up_frame_bytes():
    # sync A5, length 2, type 83, number 7, body AA BB, CRC-32 over length..body, little-endian
    buf = bytearray(64)
    buf[4:6] = b"\xaa\xbb"
    size = frames.build_up(buf, 0x83, 7, 2)
    head = bytes.fromhex("02 83 07 AA BB")
    assert bytes(buf[:size]) == b"\xa5" + head + binascii.crc32(head).to_bytes(4, "little")


def test_down_frame_bytes_are_stuffed_as_in_rfc_1662():
    # RFC 1662, 4.2: flag 7E, escape 7D, escaped octets are XORed with 20
    frame = frames.build_down(0x41, 3, b"\x7e\x7d\x11\x41")
    content = bytes.fromhex("41 03 7E 7D 11 41")
    check = binascii.crc32(content).to_bytes(4, "little")
    stuffed = b"".join(
        bytes([0x7D, octet ^ 0x20]) if octet < 0x20 or octet in (0x7D, 0x7E) else bytes([octet])
        for octet in content + check)
    assert frame == b"\x7e" + stuffed + b"\x7e"
    assert b"\x41\x7d\x23\x7d\x5e\x7d\x5d\x7d\x31\x41" in frame


@given(st.integers(0x40, 0x4F), st.integers(0, 255), st.binary(max_size=40))
def test_no_control_octet_is_ever_inside_a_down_frame(code, number, body):
    frame = frames.build_down(code, number, body)
    assert all(octet >= 0x20 for octet in frame)
    reader = frames.DownReader()
    lengths = [reader.feed(octet) for octet in frame]
    assert lengths[-1] == len(body) + 2
    assert bytes(reader.buf[: lengths[-1]]) == bytes([code, number]) + body


def test_every_message_fits_a_frame_and_sizes_match_fields():
    import struct

    for code, _, form, fields in messages.DOWN + messages.UP:
        assert struct.calcsize(form) <= messages.BODY_MAX
        assert len(struct.unpack(form, bytes(struct.calcsize(form)))) == len(fields)
        assert 0x40 <= code <= 0x9F
    codes = [row[0] for row in messages.DOWN + messages.UP]
    assert len(set(codes)) == len(codes)
