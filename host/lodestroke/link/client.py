"""The host's end of the link: one pull loop, no threads. Waiting anywhere keeps the board fed."""

from __future__ import annotations

import binascii
import codecs
from collections import deque
from collections.abc import Callable

from lodeboard.wire import messages
from lodeboard.wire.frames import UpReader, build_down

from ..errors import LinkTimeout, Refused, WireMismatch
from .decode import pack_down, unpack_up
from .events import Beat, BoardInfo, Entry, Event, Recorded, Reply, Restarted, Sample, Text
from .port import Port

RESEND_S = 0.15
TRIES = 8
BEAT_S = 0.1
_PART = 32
_OLD = 192  # a frame number so far ahead is one from before, come twice


class Client:
    """Speaks to one board over one Port. Journal entries come in order and never twice."""

    def __init__(self, port: Port) -> None:
        self.port = port
        self.info: BoardInfo | None = None
        self.reader = UpReader()
        self.events: deque[Event] = deque()
        self.saved_entry = 0  # on disk here
        self.seen_entry = 0  # handed on
        self.claimed = 0  # what hello() was told to be on disk
        self.greeting = False  # until a hello is answered nobody knows whose journal it is
        self.recalling = False
        self.up_frame = 0  # last up frame number
        self.lost_frames = 0
        self.since_beat = 0  # frames since our last beat
        self.beat_at = port.now_s()
        self.number = 0
        self.reply: Reply | None = None
        self.hello_seen: BoardInfo | None = None
        self.resends = 0
        self.text_tail = ""  # the last text the board printed, for error messages
        self.decoder = codecs.getincrementaldecoder("utf-8")("backslashreplace")

    # commands

    def hello(self, saved_entry: int | None = None) -> BoardInfo:
        """Introduce ourselves and learn who is there.

        saved_entry: the last journal entry on disk from this very boot of the board, or None.
        Raises LinkTimeout when nobody answers, WireMismatch when the board speaks another version.
        """
        code, body = pack_down(
            "hello", {"wire_version": messages.WIRE_VERSION, "saved_entry": saved_entry or 0}
        )
        self.hello_seen = None
        self.claimed = saved_entry or 0
        self.greeting = True
        try:
            for _ in range(TRIES):
                self.port.write(b"~" + build_down(code, 0, body))
                if self._wait(lambda: self.hello_seen is not None, RESEND_S * 2):
                    break
        finally:
            self.greeting = False
        info = self.hello_seen
        if info is None:
            raise self._silent("hello", TRIES * RESEND_S * 2)
        self._check_wire(info)
        self.number = 0
        self._beat()
        return info

    def _check_wire(self, info: BoardInfo) -> None:
        if info.wire_version != messages.WIRE_VERSION:
            raise WireMismatch(
                "the board's firmware speaks another version of the link",
                at=self.port.name,
                got=f"wire {info.wire_version:08x}",
                bound=f"wire {messages.WIRE_VERSION:08x} (this computer)",
                try_="install matching firmware: lodestroke flash RIG --port " + self.port.name,
            )

    def command(self, name: str, **fields: int | bytes) -> int:
        """Have the board do something; the reply's detail.

        Raises Refused with the board's reason, LinkTimeout when it does not answer.
        """
        code, body = pack_down(name, dict(fields))
        self.number = self.number % 255 + 1
        frame = build_down(code, self.number, body)
        for attempt in range(TRIES):
            self.resends += attempt > 0
            self.reply = None
            self.port.write(frame)
            if self._wait(self._answered, RESEND_S):
                break
        else:
            raise self._silent(name, TRIES * RESEND_S)
        reply = self.reply
        assert reply is not None
        if reply.result != messages.OK:
            raise self._refused(name, reply.result)
        return reply.detail

    def _answered(self) -> bool:
        return self.reply is not None and self.reply.down_frame == self.number

    def send_limits(self, blob: bytes, crc32: int, fingerprint: bytes) -> None:
        """Put the rig's limits on the board and seal them."""
        self._send_blob(messages.BLOB_LIMITS, blob, crc32, fingerprint)

    def send_program(self, records: bytes, crc32: int, fingerprint: bytes) -> None:
        """Put a program on the board and seal it."""
        self._send_blob(messages.BLOB_PROGRAM, records, crc32, fingerprint)

    def _send_blob(self, blob: int, data: bytes, crc32: int, fingerprint: bytes) -> None:
        assert binascii.crc32(data) == crc32
        for offset in range(0, len(data), _PART):
            part = data[offset : offset + _PART]
            self.command(
                "put", blob=blob, offset=offset, count=len(part), data=part.ljust(_PART, b"\0")
            )
        self.command("seal", blob=blob, length=len(data), crc32=crc32, fingerprint=fingerprint)

    def recall(self, timeout_s: float = 20.0) -> bytes:
        """The rows of the flight recorder, oldest first, packed one after another.

        Each carries its tick; a row that has not come within timeout_s is missing.
        """
        self.recalling = True
        kept: list[Event] = []
        try:
            total = self.command("recall", first=0, count=0xFFFF)
            rows = self._collect_rows(total, kept, self.port.now_s() + timeout_s)
        finally:
            self.recalling = False
            kept += (event for event in self.events if not isinstance(event, Recorded))
            self.events = deque(kept)
        return b"".join(rows[i] for i in sorted(rows))

    def _collect_rows(self, total: int, kept: list[Event], end_s: float) -> dict[int, bytes]:
        """Rows by number as they come; asks again from the first that is missing."""
        rows: dict[int, bytes] = {}
        quiet_s = self.port.now_s()
        while len(rows) < total and self.port.now_s() < end_s:
            event = self.poll(0.1)
            if isinstance(event, Recorded):
                rows[event.row] = event.body
                quiet_s = self.port.now_s()
            elif event is not None:
                kept.append(event)
            if len(rows) < total and self.port.now_s() - quiet_s > 1.0:
                first = next(i for i in range(total) if i not in rows)
                self.command("recall", first=first, count=0xFFFF)
                quiet_s = self.port.now_s()
        return rows

    # events

    def poll(self, timeout_s: float) -> Event | None:
        """The next event, waiting at most timeout_s of the port's time; None if there was none."""
        self._wait(lambda: bool(self.events), timeout_s)
        return self.events.popleft() if self.events else None

    def saved(self, entry: int) -> None:
        """Everything up to this journal entry is on disk: the board may forget it.

        An entry that this boot of the board has not sent us is of another boot, and passed over.
        """
        if self.saved_entry < entry <= self.seen_entry:
            self.saved_entry = entry
            self._beat()

    def keep_alive(self) -> None:
        """Tell the board that we are there, if it is time."""
        if self.port.now_s() - self.beat_at >= BEAT_S:
            self._beat()

    def close(self) -> None:
        """Give the port back."""
        self.port.close()

    # inside

    def _wait(self, ready: Callable[[], bool], timeout_s: float) -> bool:
        """Pump until ready() or the time is over; looks once even when there is no time."""
        end_s = self.port.now_s() + timeout_s
        left_s = timeout_s
        while not ready():
            if self.info is not None and not self.greeting:
                self.keep_alive()
            self._pump(min(max(left_s, 0.0), BEAT_S))
            left_s = end_s - self.port.now_s()
            if left_s <= 0:
                return ready()
        return True

    def _pump(self, timeout_s: float) -> None:
        """Read once and sort what came."""
        data = self.port.read(timeout_s)
        if not data:
            return
        for code, number, body in self.reader.feed(data):
            self.since_beat += 1
            message = unpack_up(code, body)
            self._sort(message, isinstance(message, BoardInfo) or self._count(number))
        if self.reader.text:
            text = self.decoder.decode(self.reader.take_text())
            self.text_tail = (self.text_tail + text)[-2000:]
            self.events.append(Text(text))
        half = 32 if self.info is not None and self.info.capabilities & messages.CAN_VIRTUAL else 2
        if self.since_beat >= half and self.info is not None and not self.greeting:
            self._beat()

    def _count(self, number: int) -> bool:
        """Follow the up frames' numbers; whether this one is new."""
        ahead = (number - self.up_frame) & 0xFF
        if ahead == 0 or ahead > _OLD:
            return False
        self.lost_frames += ahead - 1
        self.up_frame = number
        return True

    def _sort(self, message: Event | BoardInfo | Reply | None, new: bool) -> None:
        """Replies and hellos are ours; journal entries are taken in order, everything once."""
        if isinstance(message, (Sample, Beat, Recorded)):
            if new and (self.recalling or not isinstance(message, Recorded)):
                self.events.append(message)
        elif isinstance(message, Entry):
            if message.entry == self.seen_entry + 1:
                self.seen_entry = message.entry
                self.events.append(message)
        elif isinstance(message, Reply):
            self.reply = message
        elif isinstance(message, BoardInfo):
            self.hello_seen = message
            if message.wire_version == messages.WIRE_VERSION:
                self._adopt(message)

    def _adopt(self, info: BoardInfo) -> None:
        """A hello: numbers start anew, and what stands behind it belongs to this boot."""
        before = self.info
        self.info = info
        self.up_frame = 0
        if before is None:
            self.lost_frames = 0
        self._forget(everything=before is None)
        oldest = info.oldest_entry - 1
        if before is not None and before.boot_nonce == info.boot_nonce:
            self.seen_entry = max(self.seen_entry, oldest)  # what it no longer holds never comes
            return
        self.saved_entry = oldest if before is not None else max(self.claimed, oldest)
        self.seen_entry = self.saved_entry
        if before is not None:
            self.events.append(Restarted(info))

    def _forget(self, everything: bool) -> None:
        """What came before a hello is about another time: beats, or all that another host left."""
        stale = (Sample, Beat, Entry, Recorded) if everything else (Beat, Recorded)
        self.events = deque(event for event in self.events if not isinstance(event, stale))

    def _beat(self) -> None:
        code, body = pack_down("beat", {"frame": self.up_frame, "saved_entry": self.saved_entry})
        self.port.write(build_down(code, 0, body))
        self.beat_at = self.port.now_s()
        self.since_beat = 0

    def _silent(self, name: str, waited_s: float) -> LinkTimeout:
        begun = bytes(self.reader.pending).decode("utf-8", "backslashreplace")
        said = (self.text_tail + begun).strip()[-200:]
        return LinkTimeout(
            f"the board does not answer '{name}'",
            at=self.port.name,
            got=f"text instead: {said!r}" if said else "nothing",
            bound=f"an answer within {waited_s:.1f} s",
            try_="is Lodestroke's firmware on it, and no other program on the port? "
            "lodestroke flash RIG --port " + self.port.name,
        )

    def _refused(self, name: str, result: int) -> Refused:
        reason = messages.RESULTS[result] if result < len(messages.RESULTS) else f"result {result}"
        return Refused(
            f"the board refused '{name}': {reason}",
            at=self.port.name,
            got=reason,
            bound="ok",
            try_=_ADVICE.get(result, "look at the board's state with lodestroke watch"),
        )


_ADVICE = {
    messages.WRONG_STATE: "wait for the run to end, or clear the trip that is latched",
    messages.NO_LIMITS: "send the rig's limits again (run does it by itself)",
    messages.FINGERPRINT_DIFFERS: "use the rig file that this board was set up with, or flash it anew",
    messages.CUTOUT_IS_OPEN: "let the coil cool and reset the external cut-out",
    messages.STOP_IS_ACTIVE: "release the stop input",
    messages.NOT_PLAUSIBLE: "look at the pressure and current sensors' wiring",
    messages.NO_DEADMAN: "this port has no hard timer; see deadman in the rig file",
    messages.BUSY: "it is still at work, or holds entries that nobody saved: wait, then try again",
    messages.OTHER_TRIP: "name the trip that is latched now",
}
