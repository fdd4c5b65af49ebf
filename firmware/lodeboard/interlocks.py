"""The interlocks, in the order in which they are judged; the first that fires is the first-out.

A hard level trips in the tick whose samples reached it. A soft level holds the stroke back: while
any is reached the current target folds back towards fold_min_q8. judge() allocates nothing.

Causes of category 0 come before those of category 1 (trips.TABLE): a ramp that a hot coil asks for
must never hide what has to drop enable at once.
"""

from . import trips
from .compat import const
from .limits import Limits
from .sensors import Sensors

# What each watches, with its fields in limits.FIELDS: (code, watches, soft field, hard field).
# Sensor range, stuck and jump are judged before these, in sensors.py; host silent, tick late and
# the inputs in tick.py, since they need no sensor.
RULES = (
    (trips.OVER_CURRENT, "either coil's current, either way", "", "over_current_ma"),
    (trips.OUTLET_REVERSE, "outlet less chamber", "outlet_reverse_soft_pa", "outlet_reverse_hard_pa"),
    (trips.INLET_REVERSE, "chamber less inlet", "inlet_reverse_soft_pa", "inlet_reverse_hard_pa"),
    (trips.CHAMBER_HIGH, "chamber", "chamber_high_soft_pa", "chamber_high_hard_pa"),
    (trips.CHAMBER_LOW, "chamber", "chamber_low_soft_pa", "chamber_low_hard_pa"),
    (trips.OUTLET_HIGH, "outlet", "outlet_high_soft_pa", "outlet_high_hard_pa"),
    (trips.OUTLET_LOW, "outlet", "", "outlet_low_hard_pa"),
    (trips.COIL_OPEN, "either coil's current below half its target", "", "coil_open_ticks"),
    (trips.COIL_HOT, "either winding's temperature by estimate", "hot_soft_mc", "hot_hard_mc"),
    (trips.SUPPLY_LOW, "supply, where it is measured", "", "supply_low_mv"),
)

# Constants that a board's compiler folds: the places of limits.FIELDS, held to it by a test.
_CHAMBER = const(0)
_OUTLET = const(1)
_COIL_A = const(2)
_COIL_B = const(3)
_SUPPLY = const(4)
_INLET = const(5)
_OVER_CURRENT_MA = const(60)
_OUTLET_REVERSE_SOFT_PA = const(48)
_OUTLET_REVERSE_HARD_PA = const(49)
_INLET_REVERSE_SOFT_PA = const(50)
_INLET_REVERSE_HARD_PA = const(51)
_CHAMBER_HIGH_SOFT_PA = const(52)
_CHAMBER_HIGH_HARD_PA = const(53)
_CHAMBER_LOW_SOFT_PA = const(54)
_CHAMBER_LOW_HARD_PA = const(55)
_OUTLET_HIGH_SOFT_PA = const(56)
_OUTLET_HIGH_HARD_PA = const(57)
_OUTLET_LOW_HARD_PA = const(58)
_HOT_SOFT_MC = const(65)
_HOT_HARD_MC = const(66)
_COIL_OPEN_MA = const(61)
_COIL_OPEN_TICKS = const(62)
_SUPPLY_LOW_MV = const(63)


class Interlocks:
    """judge() once a tick, after the sensors were found plausible."""

    def __init__(self, limits: Limits, sensors: Sensors) -> None:
        self.limits = limits
        self.sensors = sensors
        self.soft = False
        self.slow = 0                # a category 1 cause that judge() found, or 0
        self.open_ticks_a = 0
        self.open_ticks_b = 0
        self.channel = 0
        self.value = 0
        self.limit = 0
        self.outlet_reverse_pa = 0
        self.inlet_reverse_pa = 0

    def load(self) -> None:
        """ARM: nothing counted yet."""
        self.soft = False
        self.slow = 0
        self.open_ticks_a = 0
        self.open_ticks_b = 0

    def judge(self, winding_a_mc: int, winding_b_mc: int, target_a_ma: int, target_b_ma: int) -> int:
        """A category 0 trip code or 0; `slow` is then a category 1 code or 0. Sets `soft`, and for
        either code channel, value and limit. Targets are those of the tick before.
        """
        v = self.limits.active
        x = self.sensors.values
        chamber_pa = x[_CHAMBER]
        outlet_pa = x[_OUTLET]
        a_ma = x[_COIL_A]
        b_ma = x[_COIL_B]
        outlet_reverse_pa = outlet_pa - chamber_pa
        inlet_reverse_pa = chamber_pa - x[_INLET]
        self.outlet_reverse_pa = outlet_reverse_pa
        self.inlet_reverse_pa = inlet_reverse_pa
        over_ma = v[_OVER_CURRENT_MA]
        if a_ma >= over_ma or -a_ma >= over_ma:
            return self._fires(trips.OVER_CURRENT, _COIL_A, a_ma, over_ma)
        if b_ma >= over_ma or -b_ma >= over_ma:
            return self._fires(trips.OVER_CURRENT, _COIL_B, b_ma, over_ma)
        # hard before soft, each on its own: a schedule step may tighten the one below the other
        if outlet_reverse_pa >= v[_OUTLET_REVERSE_HARD_PA]:
            return self._fires(
                trips.OUTLET_REVERSE, _OUTLET, outlet_reverse_pa, v[_OUTLET_REVERSE_HARD_PA])
        if inlet_reverse_pa >= v[_INLET_REVERSE_HARD_PA]:
            return self._fires(
                trips.INLET_REVERSE, _INLET, inlet_reverse_pa, v[_INLET_REVERSE_HARD_PA])
        if chamber_pa >= v[_CHAMBER_HIGH_HARD_PA]:
            return self._fires(trips.CHAMBER_HIGH, _CHAMBER, chamber_pa, v[_CHAMBER_HIGH_HARD_PA])
        if chamber_pa <= v[_CHAMBER_LOW_HARD_PA]:
            return self._fires(trips.CHAMBER_LOW, _CHAMBER, chamber_pa, v[_CHAMBER_LOW_HARD_PA])
        if outlet_pa >= v[_OUTLET_HIGH_HARD_PA]:
            return self._fires(trips.OUTLET_HIGH, _OUTLET, outlet_pa, v[_OUTLET_HIGH_HARD_PA])
        if outlet_pa <= v[_OUTLET_LOW_HARD_PA]:
            return self._fires(trips.OUTLET_LOW, _OUTLET, outlet_pa, v[_OUTLET_LOW_HARD_PA])
        self.soft = (
            outlet_reverse_pa >= v[_OUTLET_REVERSE_SOFT_PA]
            or inlet_reverse_pa >= v[_INLET_REVERSE_SOFT_PA]
            or chamber_pa >= v[_CHAMBER_HIGH_SOFT_PA]
            or chamber_pa <= v[_CHAMBER_LOW_SOFT_PA]
            or outlet_pa >= v[_OUTLET_HIGH_SOFT_PA]
            or winding_a_mc >= v[_HOT_SOFT_MC]
            or winding_b_mc >= v[_HOT_SOFT_MC]
        )
        return self._judge_coils(winding_a_mc, winding_b_mc, target_a_ma, target_b_ma)

    def _judge_coils(self, winding_a_mc: int, winding_b_mc: int,
                     target_a_ma: int, target_b_ma: int) -> int:
        """Coils that carry too little or are too hot, and their supply; as judge()."""
        v = self.limits.active
        x = self.sensors.values
        a_ma = x[_COIL_A]
        b_ma = x[_COIL_B]
        open_ma = v[_COIL_OPEN_MA]
        if target_a_ma >= open_ma and a_ma + a_ma < target_a_ma \
                or -target_a_ma >= open_ma and a_ma + a_ma > target_a_ma:
            self.open_ticks_a += 1
            if self.open_ticks_a >= v[_COIL_OPEN_TICKS]:
                return self._fires(trips.COIL_OPEN, _COIL_A, a_ma, target_a_ma)
        else:
            self.open_ticks_a = 0
        if target_b_ma >= open_ma and b_ma + b_ma < target_b_ma \
                or -target_b_ma >= open_ma and b_ma + b_ma > target_b_ma:
            self.open_ticks_b += 1
            if self.open_ticks_b >= v[_COIL_OPEN_TICKS]:
                return self._fires(trips.COIL_OPEN, _COIL_B, b_ma, target_b_ma)
        else:
            self.open_ticks_b = 0
        self.slow = 0
        if winding_a_mc >= v[_HOT_HARD_MC]:
            self.slow = self._fires(trips.COIL_HOT, _COIL_A, winding_a_mc, v[_HOT_HARD_MC])
        elif winding_b_mc >= v[_HOT_HARD_MC]:
            self.slow = self._fires(trips.COIL_HOT, _COIL_B, winding_b_mc, v[_HOT_HARD_MC])
        elif x[_SUPPLY] <= v[_SUPPLY_LOW_MV]:
            self.slow = self._fires(trips.SUPPLY_LOW, _SUPPLY, x[_SUPPLY], v[_SUPPLY_LOW_MV])
        return 0

    def _fires(self, code: int, channel: int, value: int, limit: int) -> int:
        """Keep what fired, for the trip record."""
        self.channel = channel
        self.value = value
        self.limit = limit
        return code
