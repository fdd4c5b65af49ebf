"""The board's end, octet by octet: bounded polls, whole frames, numbers, credits, refusals."""

from __future__ import annotations

import struct
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "firmware"))
from benches import FOREVER, Bench

from lodeboard import program, states
from lodeboard.wire import messages
from lodeboard.wire.frames import UpReader, build_down

HELLO = build_down(0x40, 0, struct.pack("<II", messages.WIRE_VERSION, 0))
CYCLES = [(program.LOOP, 0, 0, 0, 0, 9), (program.CYCLE, 0, 0, 0, 0, 0),
          (program.SEG, 0, 1, 500, 0, 20), (program.SEG, 0, 1, 0, 0, 20),
          (program.NEXT, 0, 0, 0, 0, 0), (program.CLOSE, 0, 0, 0, 0, 0),
          (program.END, 0, 2, 0, 0, 0)]


def beat(frame: int, saved: int = 0) -> bytes:
    return build_down(0x41, 0, struct.pack("<BI", frame, saved))


class Line:
    """A bench with a reader behind it, and no client: the test says every octet."""

    def __init__(self, rows=FOREVER, window: int = 32) -> None:
        self.bench = Bench(rows)
        self.service = self.bench.loop.service
        self.service.window = window
        self.reader = UpReader()

    def say(self, data: bytes, ticks: int = 3) -> list[tuple[int, int, bytes]]:
        """Send; every frame that came within some ticks."""
        self.bench.hal.rx += data
        self.bench.ticks(ticks)
        return self.hear()

    def hear(self) -> list[tuple[int, int, bytes]]:
        data = bytes(self.bench.hal.tx)
        self.bench.hal.tx.clear()
        return self.reader.feed(data)

    def replies(self, data: bytes, ticks: int = 3) -> list[tuple[int, ...]]:
        return [struct.unpack("<BBBi", body)
                for code, _, body in self.say(data, ticks) if code == 0x81]


def test_board_says_nothing_before_a_host_says_hello():
    line = Line()
    assert line.say(build_down(0x4C, 1, b""), 500) == []
    assert line.say(HELLO)[0][0] == 0x80


def test_hello_of_any_length_is_answered_with_ours():
    line = Line()
    for body in (b"", b"\x01\x02\x03\x04", bytes(30)):
        frames = line.say(build_down(0x40, 0, body))
        assert struct.unpack_from("<I", frames[0][2])[0] == messages.WIRE_VERSION
        assert frames[0][1] == 0


def test_poll_takes_at_most_32_octets_and_sends_at_most_two_frames():
    line = Line()
    line.say(HELLO)
    line.bench.hal.rx += b"x" * 100
    line.service.poll()
    assert len(line.bench.hal.rx) == 68
    line.bench.go()
    line.bench.board.samples.every = 1
    line.bench.ticks(1)
    line.hear()
    for _ in range(6):
        line.bench.board.samples.push(0, 0, 0, 0, 0, 0, 0, 0, 0, 0)
    line.service.poll()
    assert len(line.hear()) == 2


@pytest.mark.parametrize("room", [1, 3, 7, 49])
def test_frame_that_finds_little_room_is_continued_and_never_mixed_with_another(room):
    line = Line(CYCLES)
    hal = line.bench.hal
    line.say(HELLO)
    line.bench.board.samples.every = 4
    line.bench.go()
    hal.room = 0
    for _ in range(1500):
        hal.room = room
        line.bench.ticks(1)
        frames = line.hear()
        if frames:
            hal.rx += beat(frames[-1][1])
    assert line.reader.damaged == 0
    assert line.reader.take_text() == b""
    assert line.service.number != 0


def test_repeated_number_repeats_the_reply_and_does_not_act_again():
    line = Line()
    line.say(HELLO)
    line.bench.go()
    pause = build_down(0x47, 9, b"")
    assert line.replies(pause) == [(9, 0x47, messages.OK, 0)]
    assert line.bench.state == "paused"
    assert line.replies(pause) == [(9, 0x47, messages.OK, 0)]
    assert line.replies(build_down(0x47, 10, b"")) == [(10, 0x47, messages.WRONG_STATE, 0)]


def test_hello_starts_the_numbers_anew():
    line = Line()
    line.say(HELLO)
    line.bench.go()
    assert line.replies(build_down(0x47, 1, b""))[0][2] == messages.OK
    frames = line.say(HELLO)
    assert [number for _, number, _ in frames][:1] == [0]
    assert line.replies(build_down(0x48, 1, b"")) == [(1, 0x48, messages.OK, 0)]


@pytest.mark.parametrize(("code", "size"), [
    (row[0], struct.calcsize(row[2]) + more) for row in messages.DOWN[2:] for more in (-1, 1)
    if struct.calcsize(row[2]) + more >= 0])
def test_command_whose_body_has_the_wrong_size_is_refused(code, size):
    line = Line()
    line.say(HELLO)
    assert line.replies(build_down(code, 5, bytes(size))) == [
        (5, code, messages.UNKNOWN_COMMAND, 0)]
    assert line.bench.state == "safe"
    assert not line.bench.board.released


def test_code_that_no_version_knows_is_refused():
    line = Line()
    line.say(HELLO)
    for number, code in enumerate((0x50, 0x7F, 0xFF, 0x3F, 0x00), 1):
        assert line.replies(build_down(code, number, b"")) == [
            (number, code, messages.UNKNOWN_COMMAND, 0)]


WRONG = {
    "safe": (0x46, 0x47, 0x48, 0x49, 0x4A, 0x4B), "armed": (0x42, 0x43, 0x45, 0x47, 0x48, 0x4B, 0x4F),
    "running": (0x42, 0x43, 0x45, 0x46, 0x48, 0x4A, 0x4B, 0x4E, 0x4F),
}


@pytest.mark.parametrize("state", WRONG)
def test_command_that_does_not_fit_the_state_is_answered_with_the_reason(state):
    line = Line()
    line.say(HELLO)
    if state != "safe":
        assert line.bench.arm() == 0
    if state == "running":
        assert line.bench.board.go(5, 0, 0) == 0
    sizes = {row[0]: struct.calcsize(row[2]) for row in messages.DOWN}
    for number, code in enumerate(WRONG[state], 1):
        assert line.replies(build_down(code, number, bytes(sizes[code]))) == [
            (number, code, messages.WRONG_STATE, 0)]
        assert line.bench.state == state


def test_no_more_than_a_window_is_under_way_until_the_host_gives_credit():
    line = Line(window=4)
    line.say(HELLO)
    line.bench.board.samples.every = 1
    line.bench.go()
    first = line.say(b"", 40)
    assert len(first) + 1 == 4                     # the hello counts
    last = first[-1][1]
    more = line.say(beat(last), 40)
    assert [number for _, number, _ in more] == [last + 1 + k for k in range(4)]


def test_lost_credit_is_forgiven_after_a_while_of_beats():
    line = Line(window=4)
    line.say(HELLO)
    line.bench.board.samples.every = 1
    line.bench.go()
    line.say(b"", 40)
    heard = 0
    for _ in range(8):                             # these frames are lost: the host knows of none
        heard += len(line.say(beat(0), 100))
    assert heard >= 8
    assert heard <= 4 * 8


def test_beat_before_any_hello_forgets_no_entry():
    line = Line()
    line.bench.board.trip(20, 255, 1, 0)
    line.say(beat(0, 1))
    assert line.bench.board.journal.saved == 0
    line.say(HELLO)
    line.say(beat(0, 1))
    assert line.bench.board.journal.saved == 1


def test_beat_that_claims_entries_not_yet_written_is_not_believed():
    line = Line(CYCLES)
    line.say(HELLO)
    line.bench.go()
    line.say(beat(0, 1000), 100)
    assert line.bench.board.journal.saved == 0
    assert line.bench.board.journal.newest > 0


def test_board_goes_back_to_the_oldest_unsaved_entry():
    line = Line(CYCLES)
    line.say(HELLO)
    line.bench.go()
    seen: list[int] = []
    for _ in range(60):
        for code, number, body in line.say(b"", 50):
            line.bench.hal.rx += beat(number, 2)
            if code >= 0x90:
                seen.append(struct.unpack_from("<I", body)[0])
    again = seen.index(3, seen.index(3) + 1)
    assert seen[again:][:3] == [3, 4, 5]
    assert seen.count(1) <= 2


def test_beats_come_five_times_a_second_and_when_asked():
    line = Line()
    line.say(HELLO)
    beats = [row for row in line.say(b"", 1000) if row[0] == 0x82]
    assert 4 <= len(beats) <= 5
    codes = [row[0] for row in line.say(build_down(0x4C, 1, b""))]
    assert codes[:2] == [0x81, 0x82]


def test_ctrl_c_while_running_stops_first_and_then_gives_the_port_back():
    line = Line()
    line.say(HELLO)
    line.bench.go()
    line.bench.ticks(30)
    line.say(b"\x03", 1)
    assert line.bench.board.released
    assert line.bench.board.state == states.STOPPING
    line.bench.ticks(200)
    assert line.bench.state == "safe"
    assert line.bench.hal.last_drive == (0, 0, 0)


def test_octets_behind_the_release_are_left_for_the_prompt():
    line = Line()
    line.say(HELLO)
    line.say(b"\x03\x01print(1)")
    assert bytes(line.bench.hal.rx) == b"\x01print(1)"
