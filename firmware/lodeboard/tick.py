"""One control tick, to be read aloud: read, judge, sequence, regulate, write, account, record.

run() allocates nothing. An interlock acts in the tick that saw it: a category 0 trip writes duty 0
and enable 0 in that same tick. What runs every tick keeps its attributes in locals and its constants
folded: on a board a look-up by name costs more than the arithmetic.
"""

from . import trips
from .compat import const
from .program import ENDED

TYPE_CHECKING = False
if TYPE_CHECKING:
    from .board import Board

# Constants that a board's compiler folds; a test holds them to limits, states and program.
_CHAMBER = const(0)
_OUTLET = const(1)
_COIL_A = const(2)
_COIL_B = const(3)
_INLET = const(5)
_TARGET_MAX_MA = const(59)
_FOLD_MIN_Q8 = const(79)
_FOLD_FALL_Q8 = const(80)
_FOLD_RISE_Q8 = const(81)
_TICK_US = const(82)
_LATE_US = const(83)
_SILENCE_MS = const(84)
_RAMP_MA = const(85)
_ARMED = const(2)
_RUNNING = const(3)
_PAUSED = const(4)
_STOPPING = const(7)
_CYCLE = const(2)
_MOST_MA = const(32767)          # a sample's field; more has tripped long before


class Tick:
    """Runs on a board's parts; holds the targets, the fold-back and the ramp."""

    def __init__(self, board: "Board") -> None:
        self.board = board
        self.hal = board.hal
        self.limits = board.limits
        self.program = board.program
        self.sequencer = board.sequencer
        self.sensors = board.sensors
        self.interlocks = board.interlocks
        self.thermal_a = board.thermal_a
        self.thermal_b = board.thermal_b
        self.regulator_a = board.regulator_a
        self.regulator_b = board.regulator_b
        self.cycles = board.cycles
        self.samples = board.samples
        self.target_a_ma = 0
        self.target_b_ma = 0
        self.fold_q8 = 256
        self.ramping = False         # a category 1 stop is on its way down
        self.silent_ticks = 0
        self.silence_ticks = 0
        self.two_coils = False
        self.winding_mc = 0          # the hotter coil's

    def load(self) -> None:
        """ARM: take what the limits say."""
        limits = self.limits
        self.silence_ticks = limits.get("silence_ms") * 1000 // limits.get("tick_us")
        self.two_coils = limits.get("coil_b_present") != 0
        self.winding_mc = self.thermal_a.winding_mc
        self.fold_q8 = 256
        self.target_a_ma = 0
        self.target_b_ma = 0
        self.ramping = False

    def run(self, late_us: int) -> None:
        """One tick, late_us after it was due."""
        board = self.board
        sensors = self.sensors
        self.hal.read_counts(sensors.counts)
        code = sensors.convert()
        self._estimate()
        state = board.state
        if self.ramping or _ARMED <= state <= _PAUSED or state == _STOPPING:
            self._judge(code, late_us)
            state = board.state
        if state == _RUNNING:
            self._sequence()
        elif self.ramping or state == _PAUSED or state == _STOPPING:
            self._ramp_down()
        self._drive()
        if board.live:
            self._account()

    def _estimate(self) -> None:
        """Coil temperatures, from the measured currents; also while the coil is off."""
        x = self.sensors.values
        heat = self.thermal_a
        heat.step(x[_COIL_A])
        winding_mc = heat.winding_mc
        if self.two_coils:
            heat = self.thermal_b
            heat.step(x[_COIL_B])
            if heat.winding_mc > winding_mc:
                winding_mc = heat.winding_mc
        self.winding_mc = winding_mc

    def _judge(self, code: int, late_us: int) -> None:
        """Anything wrong, in the order of first-out; `code` is what the sensors found.

        Category 0 before category 1: what asks for a ramp must not hide what drops enable.
        """
        board = self.board
        limits = self.limits
        silent_ticks = self.silent_ticks + 1
        self.silent_ticks = silent_ticks
        if code:
            watch = self.sensors
            board.trip(code, watch.channel, watch.value, watch.limit)
            return
        locks = self.interlocks
        code = locks.judge(self.thermal_a.winding_mc, self.thermal_b.winding_mc,
                           self.target_a_ma, self.target_b_ma)
        inputs = self.hal.inputs()
        if code:
            board.trip(code, locks.channel, locks.value, locks.limit)
        elif inputs & 2:
            board.trip(trips.CUTOUT_OPEN, 255, 1, 1)
        elif not limits.patrol():
            board.trip(trips.LIMITS_CORRUPT, 255, limits.at, 0)
        elif not self.program.patrol():
            board.trip(trips.PROGRAM_CORRUPT, 255, self.program.at, 0)
        elif late_us >= limits.values[_LATE_US]:
            board.trip(trips.TICK_LATE, 255, late_us, limits.values[_LATE_US])
        elif locks.slow:
            board.trip(locks.slow, locks.channel, locks.value, locks.limit)
        elif inputs & 1:
            board.trip(trips.STOP_INPUT, 255, 1, 1)
        elif silent_ticks >= self.silence_ticks:
            v = limits.values
            board.trip(trips.HOST_SILENT, 255, silent_ticks * v[_TICK_US] // 1000, v[_SILENCE_MS])

    def _sequence(self) -> None:
        """The program's targets for this tick, folded back where a soft level holds the stroke."""
        sequencer = self.sequencer
        sequencer.cycle_mark = 0
        sequencer.mark = -1
        found = sequencer.step()
        if sequencer.cycle_mark and self.cycles.is_open:
            last = self.board.last_cycle
            if last and self.cycles.number + 1 >= last:
                found = ENDED
        if found:
            if found == ENDED:
                self.board.finish()
            else:
                self.board.trip(trips.PROGRAM_CORRUPT, 255, sequencer.pc, 0)
            return
        a_ma = sequencer.a_ma
        b_ma = sequencer.b_ma
        fold_q8 = self.fold_q8
        if fold_q8 < 256 or self.interlocks.soft:
            fold_q8 = self._fold(fold_q8)
            self.fold_q8 = fold_q8
            a_ma = (a_ma * fold_q8) >> 8
            b_ma = (b_ma * fold_q8) >> 8
        most_ma = self.limits.active[_TARGET_MAX_MA]
        if a_ma > most_ma:
            a_ma = most_ma
        elif a_ma < -most_ma:
            a_ma = -most_ma
        if b_ma > most_ma:
            b_ma = most_ma
        elif b_ma < -most_ma:
            b_ma = -most_ma
        self.target_a_ma = a_ma
        self.target_b_ma = b_ma

    def _fold(self, fold_q8: int) -> int:
        """The share of the target for this tick: down while a soft level is reached, else up."""
        v = self.limits.values
        if not self.interlocks.soft:
            fold_q8 += v[_FOLD_RISE_Q8]
            return fold_q8 if fold_q8 < 256 else 256
        if fold_q8 <= v[_FOLD_MIN_Q8]:       # below it only on the way up from a pause
            return fold_q8
        fold_q8 -= v[_FOLD_FALL_Q8]
        return fold_q8 if fold_q8 > v[_FOLD_MIN_Q8] else v[_FOLD_MIN_Q8]

    def _ramp_down(self) -> None:
        """Both targets one step nearer to zero."""
        step_ma = self.limits.values[_RAMP_MA]
        self.target_a_ma = _towards_zero(self.target_a_ma, step_ma)
        self.target_b_ma = _towards_zero(self.target_b_ma, step_ma)
        if self.target_a_ma == 0 and self.target_b_ma == 0:
            self.ramping = False
            self.board.down()

    def _drive(self) -> None:
        """Duties while the state allows current, otherwise nothing and enable off."""
        state = self.board.state
        if state == _RUNNING or self.ramping or state == _PAUSED or state == _STOPPING:
            x = self.sensors.values
            duty_a_q15 = self.regulator_a.step(self.target_a_ma, x[_COIL_A])
            duty_b_q15 = 0
            if self.two_coils:               # nothing is driven that is not measured
                duty_b_q15 = self.regulator_b.step(self.target_b_ma, x[_COIL_B])
            self.hal.drive(duty_a_q15, duty_b_q15, 1)
        else:
            self.off()

    def off(self) -> None:
        """Enable off, duties zero, targets and integrals forgotten."""
        self.hal.drive(0, 0, 0)
        self.target_a_ma = 0
        self.target_b_ma = 0
        self.regulator_a.reset()
        self.regulator_b.reset()

    def _account(self) -> None:
        """The cycle's account, its marks, and this tick's row, while a run or its tail lasts."""
        board = self.board
        x = self.sensors.values
        a_ma = x[_COIL_A]
        if a_ma > _MOST_MA:
            a_ma = _MOST_MA
        elif a_ma < -_MOST_MA:
            a_ma = -_MOST_MA
        b_ma = x[_COIL_B]
        if b_ma > _MOST_MA:
            b_ma = _MOST_MA
        elif b_ma < -_MOST_MA:
            b_ma = -_MOST_MA
        chamber_pa = x[_CHAMBER]
        outlet_pa = x[_OUTLET]
        winding_cc = self.winding_mc // 10
        fold_q8 = self.fold_q8
        cycles = self.cycles
        samples = self.samples
        state = board.state
        if state == _RUNNING:
            sequencer = self.sequencer
            if sequencer.cycle_mark:
                cycles.close(winding_cc, sequencer.step_now)
                if sequencer.cycle_mark == _CYCLE:
                    cycles.begin(samples.written)
            if sequencer.mark >= 0:
                board.mark(sequencer.mark, samples.written, sequencer.step_now)
        if cycles.is_open:
            locks = self.interlocks
            cycles.step(chamber_pa, outlet_pa, locks.outlet_reverse_pa, locks.inlet_reverse_pa,
                        a_ma, fold_q8 < 256)
        samples.push(a_ma, b_ma, self.target_a_ma, self.regulator_a.duty_q15,
                     chamber_pa, outlet_pa, x[_INLET], winding_cc,
                     fold_q8 if fold_q8 < 256 else 255, state)
        if board.tail_left >= 0:
            board.tail()


def _towards_zero(value_ma: int, step_ma: int) -> int:
    """One ramp step nearer to zero, never across it."""
    if value_ma > step_ma:
        return value_ma - step_ma
    if value_ma < -step_ma:
        return value_ma + step_ma
    return 0
