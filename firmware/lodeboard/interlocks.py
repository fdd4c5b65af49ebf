"""The interlocks, in the order in which they are judged; the first that fires is the first-out.

A hard level trips in the tick whose samples reached it. A soft level holds the stroke back: while
any is reached the current target folds back towards fold_min_q8. judge() allocates nothing.
"""

from . import trips
from .limits import CHAMBER, COIL_A, COIL_B, INDEX, INLET, OUTLET, SUPPLY, Limits
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
    (trips.COIL_HOT, "winding temperature by estimate", "hot_soft_mc", "hot_hard_mc"),
    (trips.COIL_OPEN, "current far below target", "", "coil_open_ticks"),
    (trips.SUPPLY_LOW, "supply, where it is measured", "", "supply_low_mv"),
)

_OVER_CURRENT = INDEX["over_current_ma"]
_OUTLET_REVERSE_SOFT = INDEX["outlet_reverse_soft_pa"]
_OUTLET_REVERSE_HARD = INDEX["outlet_reverse_hard_pa"]
_INLET_REVERSE_SOFT = INDEX["inlet_reverse_soft_pa"]
_INLET_REVERSE_HARD = INDEX["inlet_reverse_hard_pa"]
_CHAMBER_HIGH_SOFT = INDEX["chamber_high_soft_pa"]
_CHAMBER_HIGH_HARD = INDEX["chamber_high_hard_pa"]
_CHAMBER_LOW_SOFT = INDEX["chamber_low_soft_pa"]
_CHAMBER_LOW_HARD = INDEX["chamber_low_hard_pa"]
_OUTLET_HIGH_SOFT = INDEX["outlet_high_soft_pa"]
_OUTLET_HIGH_HARD = INDEX["outlet_high_hard_pa"]
_OUTLET_LOW_HARD = INDEX["outlet_low_hard_pa"]
_HOT_SOFT = INDEX["hot_soft_mc"]
_HOT_HARD = INDEX["hot_hard_mc"]
_COIL_OPEN_MA = INDEX["coil_open_ma"]
_COIL_OPEN_TICKS = INDEX["coil_open_ticks"]
_SUPPLY_LOW = INDEX["supply_low_mv"]


class Interlocks:
    """judge() once a tick, after the sensors were found plausible."""

    def __init__(self, limits: Limits, sensors: Sensors) -> None:
        self.limits = limits
        self.sensors = sensors
        self.soft = False
        self.open_ticks = 0
        self.channel = 0
        self.value = 0
        self.limit = 0
        self.outlet_reverse_pa = 0
        self.inlet_reverse_pa = 0

    def judge(self, winding_mc: int, target_a_ma: int) -> int:
        """A trip code or 0; sets `soft`, and for a trip channel, value and limit."""
        v = self.limits.active
        x = self.sensors.values
        chamber_pa = x[CHAMBER]
        outlet_pa = x[OUTLET]
        current_ma = x[COIL_A]
        outlet_reverse_pa = outlet_pa - chamber_pa
        inlet_reverse_pa = chamber_pa - x[INLET]
        self.outlet_reverse_pa = outlet_reverse_pa
        self.inlet_reverse_pa = inlet_reverse_pa
        over_ma = v[_OVER_CURRENT]
        if current_ma >= over_ma or -current_ma >= over_ma:
            return self._fires(trips.OVER_CURRENT, COIL_A, current_ma, over_ma)
        if x[COIL_B] >= over_ma or -x[COIL_B] >= over_ma:
            return self._fires(trips.OVER_CURRENT, COIL_B, x[COIL_B], over_ma)
        # hard before soft, each on its own: a schedule step may tighten the one below the other
        if outlet_reverse_pa >= v[_OUTLET_REVERSE_HARD]:
            return self._fires(
                trips.OUTLET_REVERSE, OUTLET, outlet_reverse_pa, v[_OUTLET_REVERSE_HARD])
        if inlet_reverse_pa >= v[_INLET_REVERSE_HARD]:
            return self._fires(
                trips.INLET_REVERSE, INLET, inlet_reverse_pa, v[_INLET_REVERSE_HARD])
        if chamber_pa >= v[_CHAMBER_HIGH_HARD]:
            return self._fires(trips.CHAMBER_HIGH, CHAMBER, chamber_pa, v[_CHAMBER_HIGH_HARD])
        if chamber_pa <= v[_CHAMBER_LOW_HARD]:
            return self._fires(trips.CHAMBER_LOW, CHAMBER, chamber_pa, v[_CHAMBER_LOW_HARD])
        if outlet_pa >= v[_OUTLET_HIGH_HARD]:
            return self._fires(trips.OUTLET_HIGH, OUTLET, outlet_pa, v[_OUTLET_HIGH_HARD])
        if outlet_pa <= v[_OUTLET_LOW_HARD]:
            return self._fires(trips.OUTLET_LOW, OUTLET, outlet_pa, v[_OUTLET_LOW_HARD])
        if winding_mc >= v[_HOT_HARD]:
            return self._fires(trips.COIL_HOT, COIL_A, winding_mc, v[_HOT_HARD])
        self.soft = (
            outlet_reverse_pa >= v[_OUTLET_REVERSE_SOFT]
            or inlet_reverse_pa >= v[_INLET_REVERSE_SOFT]
            or chamber_pa >= v[_CHAMBER_HIGH_SOFT]
            or chamber_pa <= v[_CHAMBER_LOW_SOFT]
            or outlet_pa >= v[_OUTLET_HIGH_SOFT]
            or winding_mc >= v[_HOT_SOFT]
        )
        if target_a_ma >= v[_COIL_OPEN_MA] and current_ma + current_ma < target_a_ma:
            self.open_ticks += 1
            if self.open_ticks >= v[_COIL_OPEN_TICKS]:
                return self._fires(trips.COIL_OPEN, COIL_A, current_ma, target_a_ma)
        else:
            self.open_ticks = 0
        if x[SUPPLY] <= v[_SUPPLY_LOW]:
            return self._fires(trips.SUPPLY_LOW, SUPPLY, x[SUPPLY], v[_SUPPLY_LOW])
        return 0

    def _fires(self, code: int, channel: int, value: int, limit: int) -> int:
        """Keep what fired, for the trip record."""
        self.channel = channel
        self.value = value
        self.limit = limit
        return code
