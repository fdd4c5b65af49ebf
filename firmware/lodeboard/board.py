"""The board: every part built once, the state it is in, and what moves it from state to state."""

from struct import pack_into, unpack

from . import states, trips
from .compat import collect, const, heap_lock, heap_unlock
from .cycles import Cycles
from .hal import Hal
from .interlocks import Interlocks
from .limits import Limits
from .program import Program, Sequencer
from .regulator import Regulator
from .rings import Journal, Samples
from .sensors import Sensors
from .thermal import Coil
from .tick import Tick
from .wire import messages

_NO_CURRENT = (states.SAFE, states.ARMED)      # a tuple made in the tick would allocate
_TRIP_FORMAT = "<IHBBBIiiB"
_TRIP_BYTES = const(22)
_END_FORMAT = "<IIIBI"
_END_BYTES = const(17)
_MARK_FORMAT = "<IIHB"
_MARK_BYTES = const(11)


class Board:
    """Everything behind the link. `hal` is the metal, or what stands in for it (hal.py)."""

    def __init__(self, hal: Hal, bundle_id: bytes, storage: "bytearray | None" = None) -> None:
        collect()                    # importing leaves garbage; the buffers below are large
        self.hal = hal
        self.bundle_id = bundle_id
        self.state = states.BOOT
        self.limits = Limits()
        self.program = Program()
        self.sequencer = Sequencer(self.program, self.limits)
        self.sensors = Sensors(self.limits)
        self.interlocks = Interlocks(self.limits, self.sensors)
        self.thermal_a = Coil()
        self.thermal_b = Coil()
        self.regulator_a = Regulator()
        self.regulator_b = Regulator()
        self.journal = Journal()
        self.samples = Samples(storage)
        self.cycles = Cycles(self.journal)
        self.run_token = 0
        self.last_cycle = 0          # 0: the program's own end decides
        self.live = False            # samples are being taken: from GO to the end plus its tail
        self.tail_left = 0
        self.locked = False
        self.stalled = False         # the loop shall not count the time since the last tick
        self.released = False        # the loop shall end and give the port back
        self.latch_dirty = False
        self.trip_code = trips.NONE
        self.trip_serial = 0
        self.trip_body = bytearray(_TRIP_BYTES)
        self.end_why = messages.ENDED_STOPPED
        self.late_ticks = 0
        self.worst_gap_us = 0
        self.tick = Tick(self)

    def boot(self) -> None:
        """Enable off, the latched trip remembered, then safe or tripped."""
        self.hal.drive(0, 0, 0)
        self.move("READY")
        kept = self.hal.load("trip")
        if kept is not None and len(kept) == _TRIP_BYTES:
            row = unpack(_TRIP_FORMAT, kept)
            self.trip_serial = row[1]
            if row[2]:
                self.trip_code = row[2]
                self.trip_body[:] = kept
                self.move("TRIP")
        if self.state == states.SAFE and self.hal.reset_was_watchdog:
            self.trip(trips.WATCHDOG_RESET, 255, 1, 0)

    def move(self, event: str) -> bool:
        """Take a transition of the table; False when the table has none."""
        to = states.NEXT[self.state].get(event)
        if to is None:
            return False
        self.state = to
        return True

    def heard(self) -> None:
        """The host is there."""
        self.tick.silent_ticks = 0

    # what the host may ask for; each answers with a result of messages.RESULTS

    def arm(self, fingerprint: bytes, program_crc32: int) -> int:
        """Check everything that must be right before current may flow, then lock the heap."""
        if "arm" not in states.NEXT[self.state]:
            return messages.WRONG_STATE
        if not self.journal.room():
            return messages.BUSY         # a trip and an end must always find a cell
        if not self.limits.whole():
            return messages.NO_LIMITS
        if not self.program.whole() or self.program.blob.crc32 != program_crc32:
            return messages.NO_PROGRAM
        if self.limits.blob.fingerprint != fingerprint \
                or self.program.blob.fingerprint != fingerprint:
            return messages.FINGERPRINT_DIFFERS
        inputs = self.hal.inputs()
        if inputs & 2:
            return messages.CUTOUT_IS_OPEN
        if inputs & 1:
            return messages.STOP_IS_ACTIVE
        if self.limits.get("deadman_needed") and \
                not self.hal.capabilities & messages.CAN_DEADMAN:
            return messages.NO_DEADMAN
        self._load()
        if self.sensors.convert() or self.sensors.any_bad():
            return messages.NOT_PLAUSIBLE
        guarded = self.hal.start_guards()
        if not guarded and self.limits.get("deadman_needed"):
            return messages.NO_DEADMAN
        self.live = False
        self.stalled = True          # proving the guards and collecting garbage took a while
        self.move("arm")
        collect()
        heap_lock()
        self.locked = True
        return messages.OK

    def _load(self) -> None:
        """Every part takes its limits."""
        self.limits.relax()
        self.sensors.load()
        self.thermal_a.load(self.limits)
        self.thermal_b.load(self.limits)
        self.regulator_a.load(self.limits)
        self.regulator_b.load(self.limits)
        self.interlocks.load()
        self.tick.load()

    def go(self, run_token: int, cycles_before: int, last_cycle: int) -> int:
        """Start the program from its first record; it ends early once last_cycle is complete."""
        if last_cycle and last_cycle <= cycles_before and self.state == states.ARMED:
            return messages.OUT_OF_BOUNDS
        if not self.move("go"):
            return messages.WRONG_STATE
        self.run_token = run_token
        self.last_cycle = last_cycle
        self.sequencer.restart()
        self.cycles.start(cycles_before)
        self.samples.clear()
        self.late_ticks = 0
        self.worst_gap_us = 0
        self.tail_left = -1
        self.live = True
        return messages.OK

    def simple(self, name: str) -> int:
        """pause, resume, stop, disarm: nothing but their transition."""
        if not self.move(name):
            return messages.WRONG_STATE
        if name == "stop":
            self.end_why = messages.ENDED_STOPPED
        elif name == "resume":
            self.tick.fold_q8 = 0      # up again as after a fold-back: no step that nobody reckoned with
        return messages.OK

    def clear(self, code: int, serial: int) -> int:
        """Clear the latched trip, if it is the one that is named."""
        if self.state != states.TRIPPED or self.tick.ramping:
            return messages.WRONG_STATE
        if code != self.trip_code or serial != self.trip_serial:
            return messages.OTHER_TRIP
        self.trip_code = trips.NONE
        self.trip_body[6] = 0          # the code's place in _TRIP_FORMAT; the serial is kept
        self.latch_dirty = True
        self.move("clear")
        return messages.OK

    def maintain(self) -> int:
        """Give the port back to the REPL; only while no current can flow."""
        if not self.move("maintain"):
            return messages.WRONG_STATE
        self.released = True
        return messages.OK

    def interrupt(self) -> None:
        """A bare Ctrl-C on the link: stop, then give the port back."""
        if self.state == states.SAFE or self.state == states.TRIPPED:
            self.released = True
        elif not self.released:
            self.simple("stop")
            self.released = True

    # what the tick finds

    def finish(self) -> None:
        """The program reached its end."""
        self.end_why = messages.ENDED_FINISHED
        self.cycles.close(self.tick.winding_mc // 10, self.sequencer.step_now)
        self.move("END")

    def down(self) -> None:
        """The ramp of a category 1 stop has reached zero."""
        if self.state == states.STOPPING:
            self.move("DOWN")
            self._end(self.end_why)

    def trip(self, code: int, channel: int, value: int, limit: int) -> None:
        """Latch the first cause; later ones only matter when they must cut a ramp short."""
        category = trips.TABLE[code][1]
        if self.state == states.TRIPPED:
            if self.tick.ramping and category == 0:
                self.tick.ramping = False
                self.tick.off()
            return
        self.trip_code = code
        self.trip_serial = (self.trip_serial + 1) & 0xFFFF
        self.latch_dirty = True
        was_live = self.live
        self.tick.ramping = category == 1 and self.state not in _NO_CURRENT
        if not self.tick.ramping:
            self.tick.off()
        self.move("TRIP")
        self.journal.own_up(0)
        at = self.journal.open(0x92, _TRIP_BYTES)
        tick = self.samples.written if was_live else 0
        pack_into(_TRIP_FORMAT, self.trip_body, 0, self.journal.newest, self.trip_serial, code,
                  channel, category, tick, value, limit, self.sequencer.step_now)
        pack_into(_TRIP_FORMAT, self.journal.rows, at, self.journal.newest, self.trip_serial, code,
                  channel, category, tick, value, limit, self.sequencer.step_now)
        if was_live and self.tail_left < 0:
            self._end(messages.ENDED_TRIPPED)

    def _end(self, why: int) -> None:
        """Journal the end of a run and start its tail."""
        if not self.live or self.tail_left >= 0:
            return
        self.cycles.is_open = False
        self.tail_left = self.limits.get("tail_ticks")
        self.journal.own_up(0)
        at = self.journal.open(0x93, _END_BYTES)
        pack_into(_END_FORMAT, self.journal.rows, at, self.journal.newest, self.samples.written,
                  self.cycles.number, why, self.run_token)

    def mark(self, number: int, tick: int, step: int) -> None:
        """Journal a mark of the schedule."""
        if self.journal.room():
            at = self.journal.open(0x91, _MARK_BYTES)
            pack_into(_MARK_FORMAT, self.journal.rows, at, self.journal.newest, tick, number, step)

    def tail(self) -> None:
        """Count down the recorder's tail once the run has ended."""
        if self.tail_left > 0:
            self.tail_left -= 1
        elif self.tail_left == 0:
            self.live = False

    def settle(self) -> None:
        """Once no current can flow: unlock the heap, then keep the latch. Called between ticks."""
        if self.state in states.ENERGISED or self.tick.ramping or self.live:
            return
        self.unlock()
        if self.latch_dirty:
            self.latch_dirty = False
            self.hal.save("trip", bytes(self.trip_body))

    def unlock(self) -> None:
        """Allow allocation again."""
        if self.locked:
            heap_unlock()
            self.locked = False
