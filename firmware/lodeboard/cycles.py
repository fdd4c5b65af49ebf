"""The account of one cycle: extremes, means, held ticks; journalled when the cycle closes."""

from struct import pack_into

from .compat import const
from .rings import Journal

_CYCLE = const(0x90)
_CYCLE_FORMAT = "<IIIIiiiiiiiHhhB"
_CYCLE_BYTES = const(51)
_FAR = const(0x1FFFFFFF)


class Cycles:
    """Numbers run on from `number`; a cycle counts when it closes."""

    def __init__(self, journal: Journal) -> None:
        self.journal = journal
        self.number = 0
        self.is_open = False
        self._clear(0)

    def start(self, cycles_before: int) -> None:
        """GO: the next cycle is cycles_before + 1."""
        self.number = cycles_before
        self.is_open = False

    def _clear(self, tick: int) -> None:
        self.tick = tick
        self.ticks = 0
        self.chamber_max_pa = -_FAR
        self.chamber_min_pa = _FAR
        self.chamber_mean_pa = 0
        self.chamber_rest = 0
        self.outlet_max_pa = -_FAR
        self.outlet_mean_pa = 0
        self.outlet_rest = 0
        self.outlet_reverse_pa = -_FAR
        self.inlet_reverse_pa = -_FAR
        self.held_ticks = 0
        self.peak_ma = 0

    def begin(self, tick: int) -> None:
        """A cycle begins in this tick."""
        self.is_open = True
        self._clear(tick)

    def step(self, chamber_pa: int, outlet_pa: int, outlet_reverse_pa: int, inlet_reverse_pa: int,
             current_ma: int, held: bool) -> None:
        """Account one tick of an open cycle."""
        n = self.ticks + 1
        self.ticks = n
        # a sum over minutes would leave the small integers: keep sum = mean * n + rest, 0 <= rest < n
        rest = self.chamber_rest + chamber_pa - self.chamber_mean_pa
        if rest < 0 or rest >= n:
            more = rest // n
            self.chamber_mean_pa += more
            rest -= more * n
        self.chamber_rest = rest
        rest = self.outlet_rest + outlet_pa - self.outlet_mean_pa
        if rest < 0 or rest >= n:
            more = rest // n
            self.outlet_mean_pa += more
            rest -= more * n
        self.outlet_rest = rest
        if chamber_pa > self.chamber_max_pa:
            self.chamber_max_pa = chamber_pa
        if chamber_pa < self.chamber_min_pa:
            self.chamber_min_pa = chamber_pa
        if outlet_pa > self.outlet_max_pa:
            self.outlet_max_pa = outlet_pa
        if outlet_reverse_pa > self.outlet_reverse_pa:
            self.outlet_reverse_pa = outlet_reverse_pa
        if inlet_reverse_pa > self.inlet_reverse_pa:
            self.inlet_reverse_pa = inlet_reverse_pa
        if current_ma < 0:
            current_ma = -current_ma
        if current_ma > self.peak_ma:
            self.peak_ma = current_ma
        if held and self.held_ticks < 65535:
            self.held_ticks += 1

    def close(self, winding_cc: int, step: int) -> None:
        """The open cycle is complete: number it and journal it."""
        if not self.is_open:
            return
        self.is_open = False
        self.number += 1
        journal = self.journal
        journal.own_up()
        # a gap that could not be owned up to yet grows, so that entries stay in cycle order
        if journal.lost_first or not journal.room():
            journal.lose(self.number)
            return
        at = journal.open(_CYCLE, _CYCLE_BYTES)
        pack_into(_CYCLE_FORMAT, journal.rows, at, journal.newest, self.number, self.tick,
                  self.ticks, self.chamber_max_pa, self.chamber_min_pa, self.chamber_mean_pa,
                  self.outlet_max_pa, self.outlet_mean_pa, self.outlet_reverse_pa,
                  self.inlet_reverse_pa, self.held_ticks, self.peak_ma, winding_cc, step)
