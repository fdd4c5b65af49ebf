"""The board's end of the link: commands in, replies, beats, journal and samples out.

poll() does a bounded amount of work and allocates nothing while the heap is locked. What cannot be
written now stays for the next poll; a frame is never interleaved with another.
"""

from struct import calcsize, pack_into, unpack_from

from . import states
from .clock import us_since
from .compat import const
from .rings import ROW_BYTES
from .wire import messages
from .wire.frames import UP_MAX, DownReader, build_up

TYPE_CHECKING = False
if TYPE_CHECKING:
    from .board import Board

_RX_BYTES = const(32)              # taken per poll
_FRAMES = const(2)                 # sent per poll
_BEAT_US = const(200000)
_FORGIVE_US = const(200000)        # credits: forget what is outstanding after this without progress
_RESEND_US = const(2000000)        # journal: go back to the oldest unsaved entry

_HELLO = const(0x40)
_BEAT = const(0x41)
_PUT = const(0x42)
_SEAL = const(0x43)
_STREAM = const(0x44)
_ARM = const(0x45)
_GO = const(0x46)
_CLEAR = const(0x4B)
_STATUS = const(0x4C)
_RECALL = const(0x4D)
_MAINTAIN = const(0x4E)
_RESET = const(0x4F)
_SIMPLE = {code: name for code, name, _, fields in messages.DOWN if not fields}
_SIZES = bytes(calcsize(form) for _, _, form, _ in messages.DOWN)     # codes run on from hello's
_BODY = 2                          # a down frame's body starts behind type and number


class Service:
    """Serves one board over its Hal's bytes."""

    def __init__(self, board: "Board") -> None:
        self.board = board
        self.hal = board.hal
        self.journal = board.journal
        self.samples = board.samples
        self.reader = DownReader()
        self.window = getattr(self.hal, "window_frames", 4)
        self.out = bytearray(UP_MAX)
        self.view = memoryview(self.out)
        self.tails = [self.view[i:] for i in range(UP_MAX)]     # made once: slices allocate
        self.out_size = 0              # 0: nothing under way
        self.out_done = 0
        self.number = 0
        self.acked = 0
        self.credit_us = 0
        self.talking = False           # a host has said hello
        self.reset_wanted = False
        self.last_down = -1
        self.reply_command = 0
        self.reply_result = 0
        self.reply_detail = 0
        self.reply_due = False
        self.hello_due = False
        self.beat_due = False
        self.beat_us = 0
        self.sent_entry = 0
        self.saved_us = 0
        self.recall_next = 0
        self.recall_end = 0

    def poll(self) -> None:
        """Take a few octets, send at most two frames."""
        for _ in range(_RX_BYTES):
            if self.board.released:
                break              # what comes now is for the prompt
            octet = self.hal.read_byte()
            if octet < 0:
                break
            n = self.reader.feed(octet)
            if n:
                self._dispatch(n - _BODY)
            elif self.reader.interrupt:
                self.reader.interrupt = False
                self.board.interrupt()
        for _ in range(_FRAMES):
            if not self._send_one():
                break

    def flush(self) -> None:
        """Send what is due before the port is given back; bounded."""
        for _ in range(200):
            if not self._send_one():
                return

    # down

    def _dispatch(self, length: int) -> None:
        """One whole down frame stands in the reader's buffer, its body `length` octets long."""
        buf = self.reader.buf
        code = buf[0]
        number = buf[1]
        self.board.heard()
        if code == _HELLO:
            self._take_hello()         # whatever its length: another version must learn of ours
            return
        at = code - _HELLO
        fits = 0 < at < len(_SIZES) and length == _SIZES[at]
        if code == _BEAT:
            if fits and self.talking:  # before our hello it speaks of another boot's journal
                self._take_beat(buf)
            return
        if number == self.last_down:
            self.reply_due = True          # our reply was lost: say it again, do not act again
            return
        self.last_down = number
        self.reply_command = code
        self.reply_detail = 0
        self.reply_result = self._act(code, buf) if fits else messages.UNKNOWN_COMMAND
        self.reply_due = True

    def _take_hello(self) -> None:
        """A host introduces itself: numbering starts anew, unsaved entries are sent again."""
        now_us = self.hal.now_us()
        self.number = 0
        self.acked = 0
        self.credit_us = now_us
        self.last_down = -1
        self.sent_entry = self.journal.saved
        self.saved_us = now_us
        self.beat_us = now_us
        self.talking = True
        self.hello_due = True
        self.reply_due = False
        self.recall_next = self.recall_end

    def _take_beat(self, buf: bytearray) -> None:
        """Credit, and how far the host's disk has come."""
        now_us = self.hal.now_us()
        acked = (buf[_BODY] + 1) & 0xFF
        # only forwards: a beat from before our last hello says nothing
        if ((acked - self.acked) & 0xFF) <= ((self.number - self.acked) & 0xFF):
            if acked != self.acked:
                self.credit_us = now_us
            self.acked = acked
        if us_since(now_us, self.credit_us) > _FORGIVE_US:
            self.acked = self.number
            self.credit_us = now_us
        saved = _le30(buf, _BODY + 1)
        if saved > self.journal.saved:
            self.journal.keep_until(saved)
            self.saved_us = now_us
            if self.sent_entry < self.journal.saved:
                self.sent_entry = self.journal.saved

    def _act(self, code: int, buf: bytearray) -> int:
        """A command that gets a reply; its result."""
        board = self.board
        if code == _GO:
            return board.go(
                _le30(buf, _BODY), _le30(buf, _BODY + 4), _le30(buf, _BODY + 8))
        if code == _CLEAR:
            serial = buf[_BODY + 1] | (buf[_BODY + 2] << 8)
            return board.clear(buf[_BODY], serial)
        if code == _STREAM:
            self.samples.every = buf[_BODY] | (buf[_BODY + 1] << 8)
            return messages.OK
        if code == _STATUS:
            self.beat_due = True
            return messages.OK
        if code == _RECALL:
            return self._recall(buf)
        if code == _PUT or code == _SEAL or code == _ARM or code == _RESET:
            if board.state != states.SAFE or board.locked:
                if code != _RESET or board.state != states.TRIPPED:
                    return messages.WRONG_STATE
            return self._act_safe(code, buf)
        if code == _MAINTAIN:
            return board.maintain()
        name = _SIMPLE.get(code)
        if name is None:
            return messages.UNKNOWN_COMMAND
        return board.simple(name)

    def _act_safe(self, code: int, buf: bytearray) -> int:
        """Commands that only a safe board takes; the heap is free here."""
        board = self.board
        if code == _RESET:
            board.released = True
            self.reset_wanted = True
            return messages.OK
        if code == _ARM:
            fingerprint, crc32 = unpack_from("<8sI", buf, _BODY)
            return board.arm(fingerprint, crc32)
        store = board.limits if buf[_BODY] == messages.BLOB_LIMITS else board.program
        if code == _PUT:
            _, offset, count, data = unpack_from("<BHB32s", buf, _BODY)
            return messages.OK if store.blob.put(offset, data, count) else messages.OUT_OF_BOUNDS
        _, length, crc32, fingerprint = unpack_from("<BHI8s", buf, _BODY)
        return messages.OK if store.seal(length, crc32, fingerprint) else messages.CHECKSUM_DIFFERS

    def _recall(self, buf: bytearray) -> int:
        """Stream rows of the flight recorder; only once it stands still."""
        if self.board.live:
            return messages.BUSY
        first = buf[_BODY] | (buf[_BODY + 1] << 8)
        count = buf[_BODY + 2] | (buf[_BODY + 3] << 8)
        end = self.samples.recorded()
        if first + count < end:
            end = first + count
        self.recall_next = first
        self.recall_end = end
        self.reply_detail = self.samples.recorded()
        return messages.OK

    # up

    def _send_one(self) -> bool:
        """Continue or start one frame; False when there is nothing to send or no room for it."""
        if self.out_size == 0 and not self._compose():
            return False
        done = self.out_done
        taken = self.hal.write(self.tails[done], self.out_size - done)
        self.out_done = done + taken
        if self.out_done < self.out_size:
            return False
        self.out_size = 0
        self.out_done = 0
        return True

    def _compose(self) -> bool:
        """Build the most urgent frame: hello, reply, beat, journal, sample, recorded row."""
        if not self.talking:
            return False
        if self.hello_due:
            self.hello_due = False
            return self._compose_hello()
        if self.reply_due:
            self.reply_due = False
            pack_into("<BBBi", self.out, 4, self.last_down, self.reply_command,
                      self.reply_result, self.reply_detail)
            return self._close(0x81, 7)
        if ((self.number - self.acked) & 0xFF) >= self.window:
            return False
        now_us = self.hal.now_us()
        if self.beat_due or us_since(now_us, self.beat_us) >= _BEAT_US:
            return self._compose_beat(now_us)
        if self._compose_entry(now_us):
            return True
        at = self.samples.peek()
        if at >= 0:
            self._copy(self.samples.rows, at, 4, ROW_BYTES)
            self.samples.pop()
            return self._close(0x83, ROW_BYTES)
        if self.recall_next < self.recall_end:
            at = self.samples.recorded_at(self.recall_next)
            self.out[4] = self.recall_next & 0xFF
            self.out[5] = self.recall_next >> 8
            self._copy(self.samples.rows, at, 6, ROW_BYTES)
            self.recall_next += 1
            return self._close(0x84, ROW_BYTES + 2)
        return False

    def _compose_hello(self) -> bool:
        """Who we are; while the heap is locked the nonce and token are small integers already."""
        board = self.board
        pack_into("<I8s8s8sIIIBB", self.out, 4, messages.WIRE_VERSION,
                  board.bundle_id, board.limits.blob.fingerprint,
                  self.hal.board_id, self.hal.boot_nonce, board.run_token,
                  self.journal.saved + 1, board.state, self.hal.capabilities)
        return self._close(0x80, 42)

    def _compose_beat(self, now_us: int) -> bool:
        """A sign of life, with what a host wants to see at a glance."""
        board = self.board
        self.beat_due = False
        self.beat_us = now_us
        dropped = self.samples.dropped
        late = board.late_ticks
        pack_into("<IIIIHHHHBBB", self.out, 4, self.samples.written,
                  board.cycles.number, self.journal.newest, board.run_token,
                  dropped if dropped < 65535 else 65535, late if late < 65535 else 65535,
                  board.worst_gap_us, board.trip_serial, board.sequencer.step_now,
                  board.state, board.trip_code)
        return self._close(0x82, 27)

    def _compose_entry(self, now_us: int) -> bool:
        """The next journal entry, going back to the oldest unsaved after a while without progress."""
        journal = self.journal
        if self.sent_entry > journal.saved and us_since(now_us, self.saved_us) > _RESEND_US:
            self.sent_entry = journal.saved
            self.saved_us = now_us
        if self.sent_entry >= journal.newest:
            return False
        if self.sent_entry == journal.saved:
            self.saved_us = now_us
        self.sent_entry += 1
        at = journal.at(self.sent_entry)
        if at < 0:
            return False
        length = journal.rows[at + 1]
        self._copy(journal.rows, at + 2, 4, length)
        return self._close(journal.rows[at], length)

    def _copy(self, source: bytearray, at: int, to: int, n: int) -> None:
        """n bytes into the frame, without a slice."""
        out = self.out
        for i in range(n):
            out[to + i] = source[at + i]

    def _close(self, code: int, length: int) -> bool:
        """Number and seal the frame."""
        self.out_size = build_up(self.out, code, self.number, length)
        self.number = (self.number + 1) & 0xFF
        return True


def _le30(buf: bytearray, at: int) -> int:
    """Four octets, little-endian, masked to 30 bits so that nothing allocates on a 32-bit board."""
    return buf[at] | (buf[at + 1] << 8) | (buf[at + 2] << 16) | ((buf[at + 3] & 0x3F) << 24)
