"""The Hal contract in words: what every place that firmware runs in must supply, and nothing more.

Only files named hal_*.py may import `machine` (or the virtual board's channel). After arming no
method may allocate. All times are 30-bit device microseconds (clock.py).
"""


class Hal:
    """Base class: each method says what is expected of it."""

    capabilities = 0          # CAN_* bits of wire/messages.py
    board_id = b"\0" * 8      # unique to this board
    boot_nonce = 0            # 30 bits, different at each boot
    reset_was_watchdog = False

    def now_us(self):
        """Device time, masked to 30 bits."""
        raise NotImplementedError

    def read_counts(self, into):
        """Fill into[0..N_CHANNELS-1] (array 'i') with raw counts; absent channels are left alone."""
        raise NotImplementedError

    def inputs(self):
        """Bit 0: stop input active. Bit 1: external cut-out open."""
        raise NotImplementedError

    def drive(self, duty_a_q15, duty_b_q15, enable):
        """Bridge duties, signed Q15, and the driver's enable line (0 or 1)."""
        raise NotImplementedError

    def feed(self):
        """Called at the end of each complete tick: feeds deadman and, when started, watchdog."""
        raise NotImplementedError

    def start_guards(self):
        """At ARM: start deadman (and watchdog, where there is one). True if a deadman is running."""
        raise NotImplementedError

    def read_byte(self):
        """One byte from the host, or -1 when there is none. Never waits."""
        raise NotImplementedError

    def write(self, view, n):
        """Offer n (at most 64) bytes to the host; the number taken. Never waits for a reader."""
        raise NotImplementedError

    def own_port(self, owned):
        """True: bytes are ours, 0x03 is data. False: give the port back to the REPL."""
        raise NotImplementedError

    def idle(self, left_us):
        """Nothing to do for left_us. A board returns at once; simulated time jumps."""
        raise NotImplementedError

    def load(self, name):
        """Bytes of a small stored file, or None. Never called while armed."""
        raise NotImplementedError

    def save(self, name, data):
        """Store a small file so that a power cut leaves the old or the new one. Never while armed."""
        raise NotImplementedError

    def reset(self):
        """Restart the board; does not return on metal."""
        raise NotImplementedError
