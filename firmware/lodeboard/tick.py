"""One control tick, to be read aloud: read, judge, sequence, regulate, write, account, record.

run() allocates nothing. An interlock acts in the tick that saw it: a category 0 trip writes duty 0
and enable 0 in that same tick.
"""

from . import states, trips
from .limits import CHAMBER, COIL_A, COIL_B, INDEX, INLET, OUTLET
from .program import CYCLE, ENDED, RUNS

TYPE_CHECKING = False
if TYPE_CHECKING:
    from .board import Board

_TARGET_MAX = INDEX["target_max_ma"]
_FOLD_MIN = INDEX["fold_min_q8"]
_FOLD_FALL = INDEX["fold_fall_q8"]
_FOLD_RISE = INDEX["fold_rise_q8"]
_RAMP = INDEX["ramp_ma"]
_LATE = INDEX["late_us"]
_SILENCE = INDEX["silence_ms"]
_TICK_US = INDEX["tick_us"]


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
        self.journal = board.journal
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
        sensors = self.sensors
        self.hal.read_counts(sensors.counts)
        code = sensors.convert()
        self._judge(code, late_us)
        state = self.board.state
        if state == states.RUNNING:
            self._sequence()
        elif self.ramping or state == states.PAUSED or state == states.STOPPING:
            self._ramp_down()
        self._drive()
        self._account()

    def _judge(self, code: int, late_us: int) -> None:
        """Anything wrong, in the order of first-out; only while armed or still ramping down.

        Category 0 before category 1: what asks for a ramp must not hide what drops enable.
        """
        board = self.board
        self._estimate()
        if not self.ramping and board.state not in states.ENERGISED:
            return
        self.silent_ticks += 1
        if code:
            watch = self.sensors
            board.trip(code, watch.channel, watch.value, watch.limit)
            return
        locks = self.interlocks
        code = locks.judge(self.thermal_a.winding_mc, self.thermal_b.winding_mc,
                           self.regulator_a.target_ma, self.regulator_b.target_ma)
        if code:
            board.trip(code, locks.channel, locks.value, locks.limit)
            return
        inputs = self.hal.inputs()
        if inputs & 2:
            board.trip(trips.CUTOUT_OPEN, 255, 1, 1)
        elif not self.limits.patrol():
            board.trip(trips.LIMITS_CORRUPT, 255, self.limits.at, 0)
        elif not self.program.patrol():
            board.trip(trips.PROGRAM_CORRUPT, 255, self.program.at, 0)
        elif late_us >= self.limits.values[_LATE]:
            board.trip(trips.TICK_LATE, 255, late_us, self.limits.values[_LATE])
        elif locks.slow:
            board.trip(locks.slow, locks.channel, locks.value, locks.limit)
        elif inputs & 1:
            board.trip(trips.STOP_INPUT, 255, 1, 1)
        elif self.silent_ticks >= self.silence_ticks:
            v = self.limits.values
            board.trip(trips.HOST_SILENT, 255, self.silent_ticks * v[_TICK_US] // 1000, v[_SILENCE])

    def _estimate(self) -> None:
        """Coil temperatures, from the measured currents; also while the coil is off."""
        x = self.sensors.values
        self.thermal_a.step(x[COIL_A])
        winding_mc = self.thermal_a.winding_mc
        if self.two_coils:
            self.thermal_b.step(x[COIL_B])
            if self.thermal_b.winding_mc > winding_mc:
                winding_mc = self.thermal_b.winding_mc
        self.winding_mc = winding_mc

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
        if found != RUNS:
            if found == ENDED:
                self.board.finish()
            else:
                self.board.trip(trips.PROGRAM_CORRUPT, 255, sequencer.pc, 0)
            return
        v = self.limits.values
        fold_q8 = self.fold_q8
        if self.interlocks.soft:
            if fold_q8 > v[_FOLD_MIN]:     # below it only on the way up from a pause
                fold_q8 -= v[_FOLD_FALL]
                if fold_q8 < v[_FOLD_MIN]:
                    fold_q8 = v[_FOLD_MIN]
        elif fold_q8 < 256:
            fold_q8 += v[_FOLD_RISE]
            if fold_q8 > 256:
                fold_q8 = 256
        self.fold_q8 = fold_q8
        a_ma = sequencer.a_ma
        b_ma = sequencer.b_ma
        if fold_q8 < 256:
            a_ma = (a_ma * fold_q8) >> 8
            b_ma = (b_ma * fold_q8) >> 8
        most_ma = self.limits.active[_TARGET_MAX]
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

    def _ramp_down(self) -> None:
        """Both targets one step nearer to zero."""
        step_ma = self.limits.values[_RAMP]
        self.target_a_ma = _towards_zero(self.target_a_ma, step_ma)
        self.target_b_ma = _towards_zero(self.target_b_ma, step_ma)
        if self.target_a_ma == 0 and self.target_b_ma == 0:
            self.ramping = False
            self.board.down()

    def _drive(self) -> None:
        """Duties while the state allows current, otherwise nothing and enable off."""
        x = self.sensors.values
        state = self.board.state
        if self.ramping or state == states.RUNNING or state == states.PAUSED \
                or state == states.STOPPING:
            self.hal.drive(
                self.regulator_a.step(self.target_a_ma, x[COIL_A]),
                self.regulator_b.step(self.target_b_ma, x[COIL_B]), 1)
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
        if not board.live:
            return
        x = self.sensors.values
        sequencer = self.sequencer
        cycles = self.cycles
        state = board.state
        winding_cc = self.winding_mc // 10
        tick = self.samples.written
        if state == states.RUNNING:
            if sequencer.cycle_mark:
                cycles.close(winding_cc, sequencer.step_now)
                if sequencer.cycle_mark == CYCLE:
                    cycles.begin(tick)
            if sequencer.mark >= 0:
                board.mark(sequencer.mark, tick, sequencer.step_now)
        if cycles.is_open:
            locks = self.interlocks
            cycles.step(x[CHAMBER], x[OUTLET], locks.outlet_reverse_pa, locks.inlet_reverse_pa,
                        x[COIL_A], self.fold_q8 < 256)
        fold_q8 = self.fold_q8 if self.fold_q8 < 256 else 255
        self.samples.push(x[COIL_A], x[COIL_B], self.target_a_ma, self.regulator_a.duty_q15,
                          x[CHAMBER], x[OUTLET], x[INLET], winding_cc, fold_q8, state)
        board.tail()


def _towards_zero(value_ma: int, step_ma: int) -> int:
    """One ramp step nearer to zero, never across it."""
    if value_ma > step_ma:
        return value_ma - step_ma
    if value_ma < -step_ma:
        return value_ma + step_ma
    return 0
