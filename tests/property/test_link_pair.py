"""Both ends of the link over a pipe that loses, doubles, damages and cuts what goes through it.

The board is the real Board, Loop and Service on a fake Hal; the host is the real Client. Time is
simulated: reading the port runs the board, as on the twin.
"""

from __future__ import annotations

import itertools
import random
import struct
import sys
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "firmware"))
from benches import Bench

from lodeboard import program
from lodeboard.wire import messages
from lodeboard.wire.frames import DownReader, UpReader, build_down, build_up
from lodestroke.errors import LinkError
from lodestroke.link import Client, Entry, Sample

ROWS = [(program.LOOP, 0, 0, 0, 0, 12), (program.CYCLE, 0, 0, 0, 0, 0),
        (program.SEG, 0, 1, 500, 0, 20), (program.SEG, 0, 1, 0, 0, 20),
        (program.NEXT, 0, 0, 0, 0, 0), (program.CLOSE, 0, 0, 0, 0, 0),
        (program.END, 0, 2, 0, 0, 0)]


class NoisyPort:
    """A Port to a bench; each byte, and each piece that is written, is at the mercy of a seeded dice.

    `piece` is the chance that a whole piece is cut short, comes twice or comes with text before it.
    """

    name = "noisy"

    def __init__(self, bench: Bench, seed: int, lose: float, flip: float, double: float,
                 piece: float = 0.0) -> None:
        self.bench = bench
        self.dice = random.Random(seed)
        self.rates = (lose, flip, double)
        self.piece = piece
        self.ticks = 0

    def _spoil(self, data: bytes) -> bytes:
        lose, flip, double = self.rates
        luck = self.dice.random() / self.piece if self.piece else 9.0
        if luck < 0.4:
            data = data[: self.dice.randrange(len(data) + 1)]
        elif luck < 0.8:
            data += data
        elif luck < 1.0:
            data = b"\xa5 text \xa5" + data
        out = bytearray()
        for octet in data:
            luck = self.dice.random()
            if luck < lose:
                continue
            if luck < lose + flip:
                out.append(octet ^ 1 << self.dice.randrange(8))
            else:
                out += bytes([octet]) * (2 if luck < lose + flip + double else 1)
        return bytes(out)

    def read(self, timeout_s: float) -> bytes:
        for _ in range(max(1, round(timeout_s * 1000))):
            self.bench.wiggle()
            self.bench.loop.step()
            self.ticks += 1
            if self.bench.hal.tx:
                data = self._spoil(bytes(self.bench.hal.tx))
                self.bench.hal.tx.clear()
                return data
        return b""

    def write(self, data: bytes) -> None:
        self.bench.hal.rx += self._spoil(data)

    def now_s(self) -> float:
        return self.ticks / 1000.0

    def close(self) -> None:
        pass


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 1 << 30), lose=st.floats(0, 0.002), flip=st.floats(0, 0.002),
       double=st.floats(0, 0.001), piece=st.floats(0, 0.05))
def test_noisy_link_delivers_every_journal_entry_once_and_in_order(seed, lose, flip, double, piece):
    bench = Bench(ROWS)
    port = NoisyPort(bench, seed, lose, flip, double, piece)
    client = Client(port)
    client.hello()
    client.command("stream", every_ticks=10)
    client.command("arm", fingerprint=bench.fingerprint, program_crc32=bench.board.program.blob.crc32)
    client.command("go", run_token=5, cycles_before=0, last_cycle=0)
    entries: list[Entry] = []
    ticks = [-1]
    while port.now_s() < 60:
        event = client.poll(0.1)
        if isinstance(event, Sample):
            ticks.append(int.from_bytes(event.body[:4], "little"))
        if isinstance(event, Entry):
            entries.append(event)
            client.saved(event.entry)
            if event.kind == "end":
                break
    assert [entry.entry for entry in entries] == list(range(1, len(entries) + 1))
    assert [e.fields["cycle"] for e in entries if e.kind == "cycle"] == list(range(1, 13))
    assert entries[-1].kind == "end"
    assert all(later > earlier for earlier, later in itertools.pairwise(ticks))
    assert all(tick % 10 == 0 for tick in ticks[1:])


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 1 << 30), rate=st.floats(0, 0.003),
       kills=st.lists(st.floats(0.05, 2.0), min_size=1, max_size=6))
def test_host_killed_at_any_moment_resumes_with_no_entry_lost_or_doubled(seed, rate, kills):
    bench = Bench(ROWS)
    port = NoisyPort(bench, seed, rate, rate, rate, rate * 10)
    disk: list[Entry] = []
    begun = False
    for length_s in [*kills, 30.0]:
        client = Client(port)                  # a new process: it knows what is on disk and no more
        client.hello(disk[-1].entry if disk else None)
        if not begun:
            client.command("arm", fingerprint=bench.fingerprint,
                           program_crc32=bench.board.program.blob.crc32)
            client.command("go", run_token=5, cycles_before=0, last_cycle=0)
            begun = True
        end_s = port.now_s() + length_s
        while port.now_s() < end_s and not (disk and disk[-1].kind == "end"):
            event = client.poll(0.05)
            if isinstance(event, Entry):
                disk.append(event)
                if port.dice.random() < 0.5:   # half of what is on disk is not acknowledged yet
                    client.saved(event.entry)
    assert [entry.entry for entry in disk] == list(range(1, 14))
    assert disk[-1].kind == "end"


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 1 << 30), rate=st.floats(0, 0.01))
def test_noisy_link_makes_every_command_act_exactly_once(seed, rate):
    bench = Bench(ROWS)
    acted = []
    original = bench.board.simple
    bench.board.simple = lambda name: acted.append(name) or original(name)  # type: ignore[method-assign]
    client = Client(NoisyPort(bench, seed, rate, rate, rate / 2, rate * 5))
    asked = []
    try:
        client.hello()
        client.command("arm", fingerprint=bench.fingerprint,
                       program_crc32=bench.board.program.blob.crc32)
        client.command("go", run_token=5, cycles_before=0, last_cycle=0)
        for name in ("pause", "resume", "pause", "resume", "stop"):
            asked.append(name)
            client.command(name)
    except LinkError:
        asked = asked[: len(acted)]       # a hopeless line: what did act, acted once and in order
    assert acted == asked


@settings(max_examples=60, deadline=None)
@given(st.lists(st.one_of(
    st.binary(max_size=80),
    st.builds(build_down, st.integers(0x40, 0x50), st.integers(0, 255), st.binary(max_size=40)),
), max_size=40))
def test_board_survives_arbitrary_bytes_and_never_energises(chunks):
    bench = Bench(ROWS)
    for chunk in chunks:
        bench.hal.rx += chunk
        bench.ticks(len(chunk) // 32 + 2)
    assert all(enable == 0 for _, _, enable in bench.hal.drives)


@settings(max_examples=200, deadline=None)
@given(st.lists(st.binary(max_size=60), max_size=20))
def test_host_reader_never_raises_and_never_invents_a_frame(chunks):
    reader = UpReader()
    text = b""
    for chunk in chunks:
        for code, number, body in reader.feed(chunk):
            buf = bytearray(64)
            buf[4 : 4 + len(body)] = body
            size = build_up(buf, code, number, len(body))
            assert bytes(buf[:size]) in b"".join(chunks)
        text += reader.take_text()
    assert len(text) <= sum(len(chunk) for chunk in chunks)


def test_random_octets_never_make_a_frame_for_the_board():
    # 200,000 octets, frame ends strewn in: a false frame needs a matching CRC-32
    dice = random.Random(20261201)
    reader = DownReader()
    for _ in range(200_000):
        octet = 0x7E if dice.random() < 0.08 else dice.randrange(0x20, 256)
        assert reader.feed(octet) == 0
    assert reader.damaged > 1000


def test_board_text_between_frames_reaches_the_host_whole():
    buf = bytearray(64)
    buf[4:32] = struct.pack(messages.SAMPLE_FORMAT, *range(11))
    size = build_up(buf, 0x83, 1, 28)
    frame = bytes(buf[:size])
    reader = UpReader()
    found = reader.feed(b"Traceback" + frame[:10])
    found += reader.feed(frame[10:] + b" (most recent")
    found += reader.feed(frame)
    assert [row[0] for row in found] == [0x83, 0x83]
    assert reader.take_text() == b"Traceback (most recent"


def test_a_stalled_reader_never_stalls_the_tick_and_samples_are_counted():
    rows = [(program.CYCLE, 0, 0, 0, 0, 0), (program.SEG, 0, 1, 500, 0, 20),
            (program.SEG, 0, 1, 500, 0, 100_000), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    port = NoisyPort(bench, 1, 0, 0, 0)
    client = Client(port)
    client.hello()
    client.command("stream", every_ticks=1)
    client.command("arm", fingerprint=bench.fingerprint, program_crc32=bench.board.program.blob.crc32)
    client.command("go", run_token=5, cycles_before=0, last_cycle=0)
    bench.hal.room = 0                     # the port is open and nobody reads
    before = bench.board.samples.written
    bench.ticks(3000)
    assert bench.board.samples.written - before == 3000
    assert bench.state == "running"
    bench.hal.room = 1 << 20
    seen = 0
    while port.now_s() < 8 and seen < 200:
        seen += isinstance(client.poll(0.05), Sample)
    assert seen == 200
    assert bench.board.samples.dropped > 1000


@pytest.mark.parametrize("state", ["running", "armed"])
def test_uploads_are_refused_with_the_reason_while_current_may_flow(state):
    from lodestroke.errors import Refused

    bench = Bench(ROWS)
    client = Client(NoisyPort(bench, 1, 0, 0, 0))
    client.hello()
    client.command("arm", fingerprint=bench.fingerprint, program_crc32=bench.board.program.blob.crc32)
    if state == "running":
        client.command("go", run_token=5, cycles_before=0, last_cycle=0)
    with pytest.raises(Refused) as refused:
        client.command("put", blob=0, offset=0, count=1, data=b"\0" * 32)
    assert refused.value.got == "wrong state"
