"""The worst single stroke, run through the plant: how far past its level a pressure gets before the
coil is off and what then still moves has come to rest.

A **push** is full current, as fast as the supply gives it, against an outlet that does not open, from
the rear stop and from the middle. A **release** is full current gone at once (a trip, a power cut)
while the slug stands at the end of its stroke; a second coil then pulls it back. The board judges
readings behind their sensors' lag, up to a whole tick late; the current then falls by itself.

A bound stands beside it, which no stroke between the other limits can pass: the energy that push,
spring and chamber can give the slug without drag while the valves are shut, and the volume from stop
to stop on the chamber's compliance.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

from ..plant import Plant
from ..plant import layout as k
from ..rig.models import Rig
from ..rig.models_pump import Valve
from ..schedule.heat import hot_resistance
from .field import greatest_push_pa, inertance_pa_s2_m3, places, return_pa
from .stroke import closing_pa, drawing_pa, front_m

STEP_S = 1e-4
_SWINGS = 1.5            # periods of slug on chamber that are followed
_LONGEST_S = 2.0
_NEVER_PA = 1e12
_STARTS = 20             # chamber pressures that a release is tried from
Judge = Callable[[float, float], float]      # (chamber, outlet) as read -> what is held to the level


@dataclass(frozen=True)
class Case:
    """One stroke to try: where it starts, what it drives, which side is blocked, who guards it."""

    kind: str                                # push or release
    start_m: float
    current_a: float
    outlet_pa: float
    blocked: str                             # outlet, inlet or nothing
    level_pa: float = math.inf
    judge: Judge = field(default=lambda chamber, outlet: -math.inf, compare=False)
    lags: tuple[float, float] = (0.0, 0.0)   # of the chamber's and the outlet's sensor, s


@dataclass(frozen=True)
class Course:
    """What a stroke did: time, chamber and outlet pressure, slug, current, all per step."""

    time_s: list[float]
    chamber_pa: list[float]
    outlet_pa: list[float]
    slug_m: list[float]
    current_a: list[float]
    off_s: float | None                      # when the driver was dropped, if it was

    def outlet_reverse_pa(self) -> float:
        """Greatest reverse pressure across the outlet valves."""
        return max(o - c for o, c in zip(self.outlet_pa, self.chamber_pa, strict=True))

    def inlet_reverse_pa(self, inlet_pa: float) -> float:
        """Greatest reverse pressure across the inlet valves."""
        return max(self.chamber_pa) - inlet_pa

    def fastest_m_s(self) -> float:
        """Greatest speed of the slug."""
        return max(abs(b - a) for a, b in zip(self.slug_m, self.slug_m[1:], strict=False)) / STEP_S

    def steepest_pa_s(self) -> float:
        """Greatest rate of the chamber's pressure."""
        return max(abs(b - a) for a, b in zip(
            self.chamber_pa, self.chamber_pa[1:], strict=False)) / STEP_S

    def first_s(self, chamber_pa: float) -> float:
        """Seconds until the chamber is at a pressure; inf when it never is."""
        return next((t for t, p in zip(self.time_s, self.chamber_pa, strict=True)
                     if p >= chamber_pa), math.inf)


def run(rig: Rig, case: Case) -> Course:
    """Integrate one stroke with the plant. Raises RigError for a rig too stiff to simulate."""
    plant = Plant.from_rig(_prepared(rig, case))
    plant.y[k.X] = case.start_m
    plant.y[k.P_OUT] = case.outlet_pa
    plant.y[k.P_CH] = (drawing_pa(rig) if case.kind == "push"
                       else case.outlet_pa + closing_pa(rig.valves.outlet))
    plant.y[k.I_A] = 0.0 if case.kind == "push" else case.current_a
    return _follow(rig, case, plant)


def _follow(rig: Rig, case: Case, plant: Plant) -> Course:
    course = Course([], [], [], [], [], None)
    seconds = min(_LONGEST_S, _SWINGS * 2 * math.pi / omega(rig) + _settle_s(rig))
    read = [plant.y[k.P_CH], plant.y[k.P_OUT]]
    share = [1.0 - math.exp(-STEP_S / lag) if lag > 0.0 else 1.0 for lag in case.lags]
    off: float | None = None
    for n in range(math.ceil(seconds / STEP_S) + 1):
        now = n * STEP_S
        y = plant.y
        for series, at in ((course.chamber_pa, k.P_CH), (course.outlet_pa, k.P_OUT),
                           (course.slug_m, k.X), (course.current_a, k.I_A)):
            series.append(float(y[at]))
        course.time_s.append(now)
        for j, at in enumerate((k.P_CH, k.P_OUT)):
            read[j] += share[j] * (y[at] - read[j])
        if off is None and case.judge(read[0], read[1]) >= case.level_pa:
            off = now + rig.board.tick
        plant.step(*_drive(rig, case, y, off is None or now < off))
    return replace(course, off_s=off)


def _drive(rig: Rig, case: Case, y: Any, on: bool) -> tuple[int, int, int]:
    """Duties that hold the current; a release drives only the coil that pulls back."""
    if not on:
        return 0, 0, 0
    if case.kind == "push":
        return _duty(rig, 0, case.current_a, float(y[k.I_A])), 0, 1
    if len(rig.coils) > 1:
        return 0, _duty(rig, 1, case.current_a, float(y[k.I_B])), 1
    return 0, 0, 0


def _duty(rig: Rig, coil: int, target: float, now: float) -> int:
    part, driver = rig.coils[coil], rig.driver
    ohm = hot_resistance(part, rig.ambient.temperature) + driver.source_resistance
    volt = target * ohm + (target - now) * part.inductance / STEP_S
    return round(32767 * min(driver.duty_max, max(0.0, volt / driver.supply)))


def _settle_s(rig: Rig) -> float:
    """Time for the current to rise or fall: five electric time constants."""
    return 5.0 * max(coil.inductance / coil.resistance for coil in rig.coils)


def _prepared(rig: Rig, case: Case) -> Rig:
    """The rig with fine ticks, valves that do not collapse, and the blocked side shut for good."""
    def side(valves: list[Valve], shut: bool) -> list[Valve]:
        strong = {"collapse": _NEVER_PA}
        if shut:
            strong |= {"cracking": _NEVER_PA, "closing": _NEVER_PA / 2, "leak": 1e21}
        return [valve.model_copy(update=strong) for valve in valves]

    return rig.model_copy(update={
        "board": rig.board.model_copy(update={"tick": STEP_S}),
        "valves": rig.valves.model_copy(update={
            "inlet": side(rig.valves.inlet, case.blocked == "inlet"),
            "outlet": side(rig.valves.outlet, case.blocked == "outlet")})})


def pushes(rig: Rig, current_a: float, **guard: Any) -> list[Course]:
    """Pushes against a blocked outlet from the rear stop and from the middle."""
    return [run(rig, Case("push", start, current_a, rig.outlet.head, "outlet", **guard))
            for start in (-rig.slug.travel / 2, 0.0)]


def release(
    rig: Rig, current_a: float, outlet_pa: float, blocked: str = "nothing", **guard: Any
) -> Course:
    """The slug let go from where a steady current holds it."""
    load = outlet_pa + closing_pa(rig.valves.outlet)
    start = front_m(rig, current_a, load)
    return run(rig, Case("release", start, current_a, outlet_pa, blocked, **guard))


def thinned(kind: str, course: Course) -> dict[str, Any]:
    """A course as lists for a plot, some 150 points: time_s, chamber_pa, outlet_pa, slug_m, current_a."""
    step = max(1, len(course.time_s) // 150)
    return {"kind": kind} | {
        name: getattr(course, name)[::step]
        for name in ("time_s", "chamber_pa", "outlet_pa", "slug_m", "current_a")}


def omega(rig: Rig) -> float:
    """Rate constant of the slug's inertance on the chamber's compliance, 1/sqrt(I C), 1/s."""
    return 1.0 / math.sqrt(inertance_pa_s2_m3(rig) * rig.chamber.compliance)


def swing_volume_pa(rig: Rig) -> float:
    """Chamber pressure that the volume from stop to stop is worth, Pa."""
    return rig.channel.area_m2 * rig.slug.travel / rig.chamber.compliance


def energy_bound_pa(
    rig: Rig, start_pa: float, level_pa: float, drive_pa: float, seconds: float
) -> float:
    """Greatest pressure after a level, by energy: no drag, valves shut, all of the drive for `seconds`
    after the level and none of it later.

    start_pa is the lowest pressure that another limit allows, drive_pa the greatest push. The slug
    crosses the level with (q/ωC)² = (P - p0)² - (P - p)², a driven undamped oscillator, goes on as
    P - (P - p) cos ωt + (q/ωC) sin ωt, and when the drive is gone peaks at the radius of its circle.
    """
    if drive_pa * 2.0 - start_pa <= level_pa:
        return level_pa                      # not even an undamped swing gets there
    speed = math.sqrt(max(0.0, (drive_pa - start_pa)**2 - (drive_pa - level_pa)**2))
    angle = omega(rig) * seconds
    if angle >= math.pi / 2:
        return 2.0 * drive_pa - start_pa
    at = drive_pa - (drive_pa - level_pa) * math.cos(angle) + speed * math.sin(angle)
    left = (drive_pa - level_pa) * math.sin(angle) + speed * math.cos(angle)
    return min(2.0 * drive_pa - start_pa, math.hypot(at, max(left, 0.0)))


def push_drive_pa(rig: Rig) -> float:
    """All that can push the slug forward: the field at full current and the spring at the rear stop."""
    return greatest_push_pa(rig) + max(0.0, return_pa(rig, -rig.slug.travel / 2, 0.0))


def release_bound_pa(rig: Rig) -> float:
    """Lowest chamber pressure after a release from the front stop, Pa: no drag, valves shut.

    The slug goes back as long as what spring (and second coil) gave, and what the chamber held at the
    start, is more than the chamber holds now: energy balance with C p²/2. Starts from any pressure
    between the inlet's opening and the chamber's upper limit.
    """
    area, squeeze = rig.channel.area_m2, rig.chamber.compliance
    way = list(reversed(places(rig)))
    step = way[0] - way[1]
    gained = [0.0]                           # from the front stop on, J
    for x in way[:-1]:
        gained.append(gained[-1] - return_pa(rig, x - step / 2) * area * step)
    low, high = drawing_pa(rig), rig.limits.chamber_high.hard
    lowest = low
    for part in range(_STARTS + 1):
        start = low + (high - low) * part / _STARTS
        for n, gain in enumerate(gained):
            now = start - area * n * step / squeeze
            if gain + squeeze * (start**2 - now**2) / 2 < 0.0 and n:
                break
            lowest = min(lowest, now)
    return lowest
