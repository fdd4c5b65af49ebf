"""The Hal contract in words: what every place that firmware runs in must supply, and nothing more.

Only files named hal_*.py may import `machine` (or the virtual board's channel). After arming no
method may allocate. All times are 30-bit device microseconds (clock.py).
"""

from array import array


class Hal:
    """Base class: each method says what is expected of it."""

    capabilities = 0          # CAN_* bits of wire/messages.py
    board_id = b"\0" * 8      # unique to this board
    boot_nonce = 0            # 30 bits, different at each boot
    reset_was_watchdog = False

    def now_us(self) -> int:
        """Device time, masked to 30 bits."""
        raise NotImplementedError

    def read_counts(self, into: "array[int]") -> None:
        """Fill into[0..N_CHANNELS-1] with raw counts; absent channels are left alone."""
        raise NotImplementedError

    def inputs(self) -> int:
        """Bit 0: stop input active. Bit 1: external cut-out open."""
        raise NotImplementedError

    def drive(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        """Bridge duties, signed Q15, and the driver's enable line (0 or 1)."""
        raise NotImplementedError

    def feed(self) -> None:
        """Called at the end of each complete tick: feeds deadman and, when started, watchdog."""
        raise NotImplementedError

    def start_guards(self) -> bool:
        """At ARM: start deadman and, where there is one, watchdog. True if a deadman runs."""
        raise NotImplementedError

    def read_byte(self) -> int:
        """One byte from the host, or -1 when there is none. Never waits."""
        raise NotImplementedError

    def write(self, view: memoryview, n: int) -> int:
        """Offer n (at most 64) bytes to the host; the number taken. Never waits for a reader."""
        raise NotImplementedError

    def own_port(self, owned: bool) -> None:
        """True: bytes are ours, 0x03 is data. False: give the port back to the REPL."""
        raise NotImplementedError

    def idle(self, left_us: int) -> None:
        """Nothing to do for left_us. A board returns at once; simulated time jumps."""
        raise NotImplementedError

    def load(self, name: str) -> "bytes | None":
        """Bytes of a small stored file, or None. Never called while armed."""
        raise NotImplementedError

    def save(self, name: str, data: bytes) -> None:
        """Store a small file; a power cut leaves the old or the new one. Never while armed."""
        raise NotImplementedError

    def reset(self) -> None:
        """Restart the board; does not return on metal."""
        raise NotImplementedError
