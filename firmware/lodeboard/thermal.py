"""Coil temperature by estimate: two nodes, winding and body, driven by the measured current squared.

Units, chosen so that every product stays within 30 bits:
- temperatures in milli-degrees Celsius, kept in Q10 (`_mcq`) so that slow rises are not rounded away;
- power in mW = mean(i_ma^2 >> 10) * r_mohm / 977, because 2**10 mA^2 * mohm = 1.024 uW;
- one update per 64 ticks, with step dt = 64 ticks:
  heat_winding_q      milli-degrees (Q10) that 1 mW raises the winding by in dt, Q4
  heat_leak_winding_q share of (winding - body) that leaves the winding in dt, Q16
  heat_leak_body_q    share of (winding - body) that arrives in the body in dt, Q16
  heat_body_leak_q    share of (body - ambient) that leaves the body in dt, Q16
- alpha_ppm: temperature coefficient of resistance at 20 degC (copper 3930, IEC 60028).

Source: lumped two-node network, explicit Euler; dt is far below the winding's time constant.
"""

from .compat import const
from .limits import Limits

_EVERY = const(64)
_LIMIT_MCQ = const(307200000)          # 300 degC in Q10: the estimate saturates, it never wraps


class Coil:
    """One coil's estimate. step() each tick allocates nothing."""

    def __init__(self) -> None:
        self.winding_mcq = 0
        self.body_mcq = 0
        self.ambient_mcq = 0
        self.winding_mc = 0
        self.sum_sq = 0
        self.ticks = 0
        self.r20_mohm = 0
        self.alpha_ppm = 0
        self.heat_q = 0
        self.leak_winding_q = 0
        self.leak_body_q = 0
        self.body_leak_q = 0
        self.warm = False

    def load(self, limits: Limits) -> None:
        """Take the coefficients; the temperatures start at ambient once and are then kept."""
        get = limits.get
        self.ambient_mcq = get("ambient_mc") << 10
        self.r20_mohm = get("r20_mohm")
        self.alpha_ppm = get("alpha_ppm")
        self.heat_q = get("heat_winding_q")
        self.leak_winding_q = get("heat_leak_winding_q")
        self.leak_body_q = get("heat_leak_body_q")
        self.body_leak_q = get("heat_body_leak_q")
        if not self.warm:
            self.warm = True
            self.winding_mcq = self.ambient_mcq
            self.body_mcq = self.ambient_mcq
            self.winding_mc = self.ambient_mcq >> 10

    def step(self, current_ma: int) -> None:
        """Account one tick of current; update the nodes every 64 ticks."""
        ticks = self.ticks + 1
        self.ticks = ticks
        self.sum_sq = self.sum_sq + ((current_ma * current_ma) >> 10)
        if ticks >= _EVERY:
            self._update()

    def _update(self) -> None:
        mean_sq = self.sum_sq >> 6
        self.sum_sq = 0
        self.ticks = 0
        # resistance now: r20 (1 + alpha (T - 20 degC)); mohm * ppm first per kelvin to stay small
        rise_k = (self.winding_mc - 20000) // 1000
        r_mohm = self.r20_mohm + ((self.r20_mohm * self.alpha_ppm // 1000) * rise_k) // 1000
        power_mw = mean_sq * r_mohm // 977
        across_mc = (self.winding_mcq - self.body_mcq) >> 10
        above_mc = (self.body_mcq - self.ambient_mcq) >> 10
        winding_mcq = self.winding_mcq + ((power_mw * self.heat_q) >> 4)
        winding_mcq -= (across_mc * self.leak_winding_q) >> 6
        body_mcq = self.body_mcq + ((across_mc * self.leak_body_q) >> 6)
        body_mcq -= (above_mc * self.body_leak_q) >> 6
        if winding_mcq > _LIMIT_MCQ:
            winding_mcq = _LIMIT_MCQ
        if body_mcq > _LIMIT_MCQ:
            body_mcq = _LIMIT_MCQ
        self.winding_mcq = winding_mcq
        self.body_mcq = body_mcq
        self.winding_mc = winding_mcq >> 10
