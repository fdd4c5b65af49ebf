"""What will disappoint of slug, spring, chamber and valves."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from typing import Any

from ..rig.models import Rig
from .field import face_pressure_pa, field_a_m, return_pa
from .flow import LAMINAR_BELOW
from .stroke import collapse_pa, delivering_pa, drawing_pa
from .warn import Stroke, Warn, brief, judgement

LOST_SHARE = 0.5         # of the moved volume, to the chamber's compliance
STIFF_SHARE = 0.5        # of the push, taken by the spring at the end of the stroke
LEFT_OUT_SHARE = 0.1     # of the push: beyond, the simulation is off by more than its other doubts
RING_SHARE = 0.25        # of the push, swinging at the resonance
_HARMONICS = 30
FILM_SHARE = 0.05        # of the moved volume, left on the wall
LEAK_SHARE = 0.05        # of what a 1 Hz stroke delivers


@judgement
def pump_delivers(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Push against load, then the stroke against the chamber's compliance."""
    stroke, push = facts["stroke"], facts["slug"]["greatest_push_pa"]
    load = delivering_pa(rig) + rig.slug.hysteresis
    if push <= load:
        yield Warn("push_too_weak", "full current cannot open the outlet",
                   f"{brief(push, 'Pa')} of push", f"above {brief(load, 'Pa')}: outlet head, cracking "
                   "and contact lines", "more current or turns, a stronger liquid, a lower head")
        return
    if stroke["moved_m3"] <= 0.0:
        return                               # the spring's warning tells it
    lost = stroke["lost_to_compliance_m3"] / stroke["moved_m3"]
    if lost >= LOST_SHARE:
        nothing = "nothing is delivered: " if lost >= 1.0 else ""
        yield Warn("stroke_lost_to_compliance",
                   f"{nothing}the chamber's compliance takes {lost:.0%} of the stroke",
                   f"{brief(stroke['lost_to_compliance_m3'], 'm^3')} of "
                   f"{brief(stroke['moved_m3'], 'm^3')} moved", f"below {LOST_SHARE:.0%}",
                   "a stiffer chamber, less gas in it, a longer stroke or lower cracking pressures")


@judgement
def slug_returns(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """The spring strong enough to draw, weak enough to leave a stroke."""
    front = facts["stroke"]["displacement_m"]
    needed = drawing_pa(rig) - rig.slug.hysteresis
    pull = return_pa(rig, rig.slug.travel / 2)
    if pull >= needed:
        yield Warn("return_too_weak", "the slug does not come back far enough to draw",
                   f"{brief(-pull, 'Pa')} of pull at the front stop",
                   f"above {brief(-needed, 'Pa')}: the inlet's cracking, its head and contact lines",
                   "a smaller spring volume, a longer travel, or a lower inlet cracking pressure")
        return
    push = facts["slug"]["greatest_push_pa"]
    share = -return_pa(rig, front, 0.0) / push
    if share >= STIFF_SHARE:
        yield Warn("spring_too_stiff", f"the spring holds {share:.0%} of the push at the stroke's end",
                   f"{brief(-return_pa(rig, front, 0.0), 'Pa')} of {brief(push, 'Pa')}, the slug stops "
                   f"at {brief(front, 'm')} of {brief(rig.slug.travel / 2, 'm')}",
                   f"below {STIFF_SHARE:.0%}", "a larger spring volume")


@judgement
def resonance(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """A harmonic of the stroke rate within the half-power band of slug on chamber and spring."""
    own, damping = facts["stroke"]["resonance_hz"], facts["stroke"]["damping_ratio"]
    told: set[float] = set()
    for stroke in strokes:
        n = max(1, round(own / stroke.rate_hz))
        if n > _HARMONICS or stroke.rate_hz in told or damping >= 0.5:
            continue
        off = abs(n * stroke.rate_hz - own) / own
        swing = _ring(n, stroke, own, damping)
        if off <= damping and swing >= RING_SHARE:
            told.add(stroke.rate_hz)
            yield Warn("resonance", f"harmonic {n} of {brief(stroke.rate_hz, 'Hz')} meets the "
                       "resonance of slug, chamber and spring",
                       f"{brief(n * stroke.rate_hz, 'Hz')}, swings of up to {swing:.0%} of the push",
                       f"{damping:.1%} away from {brief(own, 'Hz')}",
                       f"a rate {damping:.1%} off, or a rise longer than {brief(1.0 / own, 's')}")


def _ring(n: int, stroke: Stroke, own_hz: float, damping: float) -> float:
    """Swing at resonance over the push: Fourier part of a train of soft-edged pulses, 2/(n pi) at
    most, times sinc of its edge, times the gain 1/(2 zeta). Source: Fourier series of a trapezoid."""
    edge = math.pi * own_hz * stroke.rise_s
    soft = abs(math.sin(edge) / edge) if edge > 0.0 else 1.0
    return 2.0 / (n * math.pi) * soft / (2.0 * damping)


@judgement
def valves_hold(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Each side's valves hold what the other side's need to open."""
    push = delivering_pa(rig) - rig.inlet.head
    pull = rig.outlet.head - drawing_pa(rig)
    for side, needs, valves in (("inlet", push, rig.valves.inlet),
                                ("outlet", pull, rig.valves.outlet)):
        holds = collapse_pa(valves)
        if holds <= 1.5 * needs:
            other = "outlet opens" if side == "inlet" else "inlet opens"
            yield Warn(f"{side}_valve_near_collapse", f"the {side} valve is near its collapse each "
                       f"time the {other}", f"collapse at {brief(holds, 'Pa')}",
                       f"above {brief(1.5 * needs, 'Pa')}: one and a half times the "
                       f"{brief(needs, 'Pa')} it must hold",
                       "a lower head, valves in series, or a stronger magnet at that valve")


@judgement
def left_out_terms(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Own field and traction, where they are no longer small."""
    out = facts["left_out"]
    push = abs(out["push_at_rest_pa"])
    for name, words in (("own_field_pa", "the liquid's own field"),
                        ("normal_traction_pa", "the traction at the slug's faces")):
        share = abs(out[name]) / push if push > 0.0 else 0.0
        if share >= LEFT_OUT_SHARE:
            yield Warn("left_out_" + name.removesuffix("_pa"),
                       f"{words} is left out and makes {share:.0%} of the push",
                       f"{brief(out[name], 'Pa')} of {brief(push, 'Pa')}", f"below {LEFT_OUT_SHARE:.0%}",
                       "take the simulated push with that doubt; measure the real one")


@judgement
def kind_of_flow(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """Laminar, and slow enough for the steady profile; a film that takes little; a slug that holds."""
    flow = facts["flow"]
    for name, words in (("reynolds_slug", "slug"), ("reynolds_liquid", "pumped liquid")):
        if flow[name] >= LAMINAR_BELOW:
            yield Warn("turbulent", f"the {words} does not stay laminar at its fastest",
                       f"Reynolds number {flow[name]:.0f}", f"below {LAMINAR_BELOW:.0f}",
                       "a smaller bore or softer strokes; real drag is above the simulated one")
    if flow["film_volume_share"] is not None and flow["film_volume_share"] >= FILM_SHARE:
        yield Warn("film_on_wall", "the slug leaves much of itself on the wall at its fastest",
                   f"{flow['film_volume_share']:.1%} of the swept volume, capillary number "
                   f"{flow['capillary']:.2g}", f"below {FILM_SHARE:.0%}",
                   "softer strokes, a thinner liquid, a wall that it does not wet")
    if flow["bond"] is not None and flow["bond"] >= 1.0:
        yield Warn("slug_may_sag", "gravity is as strong as the surface tension that holds the slug "
                   "across its bore", f"Bond number {flow['bond']:.2g}", "below 1",
                   "mount the channel upright or take a smaller bore")
    if rig.slug.length < 2.0 * _half_width(rig):
        yield Warn("slug_short", "the slug is shorter than its bore is wide",
                   brief(rig.slug.length, "m"), f"above {brief(2.0 * _half_width(rig), 'm')}",
                   "a longer slug: end effects and its own field are no longer small")


def _half_width(rig: Rig) -> float:
    channel = rig.channel
    return channel.radius or min(channel.width or 0.0, channel.height or 0.0) / 2


@judgement
def leaks(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """What runs back through closed valves, against what the slowest stroke delivers."""
    rate = min((stroke.rate_hz for stroke in strokes), default=1.0)
    back, forth = facts["flow"]["leak_m3_s"], facts["stroke"]["volume_m3"] * rate
    if forth > 0.0 and back >= LEAK_SHARE * forth:
        yield Warn("leak", f"closed valves leak {back / forth:.0%} of what {brief(rate, 'Hz')} delivers",
                   f"{back * 6e10:.3g} ul/min of {forth * 6e10:.3g} ul/min", f"below {LEAK_SHARE:.0%}",
                   "a faster rate, or fresh liquid in the valves")


@judgement
def primes(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """A bubble of one stroke already stops it."""
    most, stroke = facts["priming"]["greatest_gas_m3"], facts["priming"]["stroke_m3"]
    if stroke > 0.0 and most < 5.0 * stroke:
        yield Warn("gas_stops_it", "little gas in the chamber already stops the pump",
                   f"at {brief(most, 'm^3')}, {most / stroke:.2g} strokes",
                   "above 5 strokes", "lower cracking pressures or head, a longer stroke; fill it wet")


@judgement
def faces_in_field(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke]) -> Iterator[Warn]:
    """A coil whose middle lies inside the resting slug pulls both faces and wastes its field."""
    coil, current = rig.coils[0], rig.limits.current
    half = rig.slug.length / 2
    near, far = (face_pressure_pa(rig, field_a_m(rig, coil, z, current)) for z in (half, -half))
    if near > 0.0 and far >= 0.5 * near:
        yield Warn("field_wasted", "the coil pulls the slug's rear face nearly as hard as its front",
                   f"{brief(far, 'Pa')} against {brief(near, 'Pa')} at rest", "less than half",
                   "move the coil towards the chamber, or take a shorter coil or a longer slug")
