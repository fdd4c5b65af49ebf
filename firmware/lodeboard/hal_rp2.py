"""RP2040 and RP2350: ADC, bridge PWM, enable line, deadman, watchdog. Pins from board.json.

Enable is off from the first statement. The deadman is a hard timer that drops the enable line when
the loop has not fed it for a few periods; MicroPython has hard timers here from 1.26 on, so it is
tried and, when ARM asks for it, proved. Behind it runs the chip's watchdog, started at the first
ARM: once started it cannot be stopped, so giving the port back afterwards takes a reset.
The hot methods (read_counts, inputs, drive, feed, read_byte, write, now_us) allocate nothing.
"""

import os
import sys
import time
from array import array

import machine

from .clock import MASK_US
from .hal_stdio import StdioHal
from .limits import CHANNELS
from .store import Store
from .wire.messages import CAN_DEADMAN, CAN_WATCHDOG

TYPE_CHECKING = False
if TYPE_CHECKING:
    from typing import Any

    def _ticks_us() -> int: ...           # the stubs make it an opaque type
else:
    _ticks_us = time.ticks_us

_DEADMAN_PERIOD_MS = 5
_DEADMAN_PERIODS = 4          # 20 ms without a whole tick: enable off
_WATCHDOG_MS = 2000           # longer than the longest flash erase (400 ms by data sheet)
_MAINTAIN_FLAG = "/maintain"  # boot/slots.py looks for it
# Watchdog scratch words 0 and 1 survive a reset: "the watchdog was running" and its inverse.
_SCRATCH_RP2040 = 0x40058000 + 0x0C
_SCRATCH_RP2350 = 0x400D8000 + 0x0C
_RUNNING = 0x10DE57


def _scratch() -> int:
    return _SCRATCH_RP2350 if "RP2350" in sys.implementation._machine else _SCRATCH_RP2040


class Deadman:
    """A hard timer that drops a pin when nobody feeds it. One that has let go stays down until the
    firmware itself asks for enable 0.
    """

    def __init__(self, enable: "machine.Pin") -> None:
        self.enable = enable
        self.unfed = 0
        self.rounds = 0
        self.dropped = False
        self.timer: "machine.Timer | None" = None
        self.callback = self.check           # bound once: a bound method allocates
        self.possible = self._try()

    def _try(self) -> bool:
        """Whether this interpreter has hard timers: 1.26 on. Earlier ones know no such argument."""
        try:
            self._make().deinit()
        except (TypeError, ValueError):
            return False
        return True

    def _make(self) -> "machine.Timer":
        return machine.Timer(-1, period=_DEADMAN_PERIOD_MS, mode=machine.Timer.PERIODIC,
                             callback=self.callback, hard=True)

    def check(self, _timer: "machine.Timer") -> None:
        """Interrupt: may not allocate; an exception would take the callback away for good."""
        try:
            self.rounds = (self.rounds + 1) & 0xFFFF
            self.unfed += 1
            if self.unfed > _DEADMAN_PERIODS:
                self.enable.value(0)
                self.dropped = True
                self.unfed = _DEADMAN_PERIODS
        except Exception:
            pass

    def start(self) -> bool:
        """Start it, and see it come round. False where it cannot be had."""
        if not self.possible:
            return False
        if self.timer is None:
            self.timer = self._make()
        before = self.rounds
        time.sleep_ms(3 * _DEADMAN_PERIOD_MS)
        self.unfed = 0
        return self.rounds != before


class Bridge:
    """One H-bridge or half bridge: a PWM input for each direction."""

    def __init__(self, forward: int, reverse: "int | None", pwm_hz: int) -> None:
        self.forward = machine.PWM(machine.Pin(forward), freq=pwm_hz, duty_u16=0)
        self.reverse = None
        if reverse is not None:
            self.reverse = machine.PWM(machine.Pin(reverse), freq=pwm_hz, duty_u16=0)

    def set(self, duty_q15: int) -> None:
        """Signed duty; the direction that is not driven is off first."""
        reverse = self.reverse
        if duty_q15 >= 0:
            if reverse is not None:
                reverse.duty_u16(0)
            self.forward.duty_u16(duty_q15 << 1)
            return
        self.forward.duty_u16(0)
        if reverse is not None:
            reverse.duty_u16(-duty_q15 << 1)


class Rp2Hal(StdioHal):
    """The Hal of both chips; what differs is one address."""

    def __init__(self, config: "dict[str, Any]") -> None:
        pins = config["pins"]
        self.enable = machine.Pin(pins["enable"], machine.Pin.OUT, value=0)
        StdioHal.__init__(self)
        pwm_hz = config["pwm_hz"]
        self.bridge_a = Bridge(pins["bridge_a"], pins.get("bridge_a_reverse"), pwm_hz)
        self.bridge_b = None
        if "bridge_b" in pins:
            self.bridge_b = Bridge(pins["bridge_b"], pins.get("bridge_b_reverse"), pwm_hz)
        names = [name for name in CHANNELS if name in pins]
        self.adcs = [machine.ADC(machine.Pin(pins[name])) for name in names]
        self.places = array("B", [CHANNELS.index(name) for name in names])
        self.n_adcs = len(names)
        self.stop = self._input(pins.get("stop"))
        self.cutout = self._input(pins.get("cutout"))
        self.deadman = Deadman(self.enable)
        self.watchdog: "machine.WDT | None" = None
        self.store = Store("/store")
        self.board_id = (machine.unique_id() + b"\0" * 8)[:8]
        self.boot_nonce = int.from_bytes(os.urandom(4), "little") >> 2
        self.capabilities = CAN_WATCHDOG | (CAN_DEADMAN if self.deadman.possible else 0)
        self.reset_was_watchdog = self._take_reset_cause()

    def _input(self, pin: "int | None") -> "machine.Pin | None":
        if pin is None:
            return None
        return machine.Pin(pin, machine.Pin.IN, machine.Pin.PULL_UP)

    def _take_reset_cause(self) -> bool:
        """Whether the watchdog bit. machine.reset() has the same cause here, so a word of our own,
        set while the watchdog runs and taken away before a wanted reset, has to tell them apart.
        """
        at = _scratch()
        ours = machine.mem32[at] == _RUNNING and machine.mem32[at + 4] == 0xFFFFFFFF ^ _RUNNING
        machine.mem32[at] = 0
        return ours and machine.reset_cause() == machine.WDT_RESET

    def now_us(self) -> int:
        return _ticks_us() & MASK_US

    def read_counts(self, into: "array[int]") -> None:
        adcs = self.adcs
        places = self.places
        for i in range(self.n_adcs):
            into[places[i]] = adcs[i].read_u16()

    def inputs(self) -> int:
        """Stop input: active low. Cut-out: its contact pulls to ground, open reads high."""
        bits = 0
        stop = self.stop
        if stop is not None and not stop.value():
            bits = 1
        cutout = self.cutout
        if cutout is not None and cutout.value():
            bits |= 2
        return bits

    def drive(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        deadman = self.deadman
        if not enable:
            self.enable.value(0)
            deadman.dropped = False
        self.bridge_a.set(duty_a_q15)
        bridge_b = self.bridge_b
        if bridge_b is not None:
            bridge_b.set(duty_b_q15)
        if enable and not deadman.dropped:
            self.enable.value(1)

    def feed(self) -> None:
        self.held = False
        self.deadman.unfed = 0
        watchdog = self.watchdog
        if watchdog is not None:
            watchdog.feed()

    def start_guards(self) -> bool:
        proved = self.deadman.start()
        if self.watchdog is None:
            at = _scratch()
            machine.mem32[at + 4] = 0xFFFFFFFF ^ _RUNNING
            machine.mem32[at] = _RUNNING
            self.watchdog = machine.WDT(timeout=_WATCHDOG_MS)
        return proved

    def own_port(self, owned: bool) -> None:
        """Nobody feeds a running watchdog at the prompt, so the way there is then a reset."""
        if not owned and self.watchdog is not None:
            with open(_MAINTAIN_FLAG, "w"):
                pass
            self.reset()
        StdioHal.own_port(self, owned)

    def idle(self, left_us: int) -> None:
        """The loop polls the link instead."""

    def load(self, name: str) -> "bytes | None":
        return self.store.load(name)

    def save(self, name: str, data: bytes) -> None:
        watchdog = self.watchdog
        if watchdog is not None:
            watchdog.feed()               # an erase stops everything for up to 400 ms
        self.store.save(name, data)

    def reset(self) -> None:
        self.drive(0, 0, 0)
        machine.mem32[_scratch()] = 0     # a wanted reset
        machine.reset()


def open_hal(config: "dict[str, Any]") -> Rp2Hal:
    """The Hal for the pins that the slot's board.json names."""
    return Rp2Hal(config)
