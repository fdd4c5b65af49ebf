"""Coil current regulator: target and measured current in mA, bridge duty in Q15.

The target is fed forward; proportional and integral action work on what the coil should carry by
now, its first-order answer to the targets so far, so that a steep rise does not wind the integral
up and overshoot. The integral stops where the duty is clamped. step() allocates nothing.
"""

from .limits import Limits


class Regulator:
    """One bridge. Gains are Q8 duty counts per mA; response_q8 is 1 - exp(-tick R/L)."""

    def __init__(self) -> None:
        self.kp_q8 = 0
        self.ki_q8 = 0
        self.feed_q8 = 0
        self.response_q8 = 0
        self.duty_min_q15 = 0
        self.duty_max_q15 = 0
        self.integral_q8 = 0
        self.duty_q15 = 0
        self.expected_q4 = 0      # mA in Q4: what the coil should carry by now

    def load(self, limits: Limits) -> None:
        """Take gains and clamps."""
        get = limits.get
        self.kp_q8 = get("kp_q8")
        self.ki_q8 = get("ki_q8")
        self.feed_q8 = get("feed_q8")
        self.response_q8 = get("response_q8")
        self.duty_min_q15 = get("duty_min_q15")
        self.duty_max_q15 = get("duty_max_q15")
        self.reset()

    def reset(self) -> None:
        """Forget the integral: the output is off."""
        self.integral_q8 = 0
        self.duty_q15 = 0
        self.expected_q4 = 0

    def step(self, target_ma: int, current_ma: int) -> int:
        """The duty for this tick."""
        expected_q4 = self.expected_q4
        self.expected_q4 = expected_q4 + ((((target_ma << 4) - expected_q4) * self.response_q8) >> 8)
        if target_ma == 0 and self.duty_min_q15 == 0:
            # a half bridge cannot pull current down: off is the fastest way to zero
            self.integral_q8 = 0
            self.duty_q15 = 0
            return 0
        error_ma = (expected_q4 >> 4) - current_ma
        integral_q8 = self.integral_q8 + error_ma * self.ki_q8
        duty_q15 = (target_ma * self.feed_q8 + error_ma * self.kp_q8 + integral_q8) >> 8
        if duty_q15 > self.duty_max_q15:
            duty_q15 = self.duty_max_q15
            if error_ma > 0:
                integral_q8 = self.integral_q8
        elif duty_q15 < self.duty_min_q15:
            duty_q15 = self.duty_min_q15
            if error_ma < 0:
                integral_q8 = self.integral_q8
        self.integral_q8 = integral_q8
        self.duty_q15 = duty_q15
        return duty_q15
