"""Rigs that cannot work are refused with the numbers, just beyond the bound and not before it."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import pytest

from lodestroke.errors import RigError
from lodestroke.margin.field import greatest_push_pa
from lodestroke.rig import Rig, load_rig
from lodestroke.rig.checks_work import push_bound_pa

Edit = Callable[..., Path]
MU0 = 4e-7 * math.pi


def refusal(path: Path) -> RigError:
    with pytest.raises(RigError) as caught:
        load_rig(path)
    return caught.value


def test_push_bound_is_above_every_push_of_the_bench_and_meets_saturation(bench: Rig) -> None:
    bound = push_bound_pa(bench.coils, bench.slug, bench.limits.current)
    assert greatest_push_pa(bench) < bound < 1.1 * greatest_push_pa(bench)
    # far above saturation p_m -> mu0 Ms (H - Ms ln(6 chi H/Ms)/(3 chi H) ...): Rosensweig 1985; here
    # the limit mu0 Ms H itself is approached from below
    huge = push_bound_pa(bench.coils, bench.slug, 1e6)
    coil = bench.coils[0]
    thick, half = coil.outer_radius - coil.inner_radius, coil.length / 2
    field = 1e6 * coil.turns / (2 * thick) * math.log(
        (coil.outer_radius + math.hypot(coil.outer_radius, half))
        / (coil.inner_radius + math.hypot(coil.inner_radius, half)))
    assert huge == pytest.approx(MU0 * bench.slug.saturation_magnetisation * field, rel=1e-4)


def test_push_bound_is_the_linear_liquid_s_in_weak_fields(bench: Rig) -> None:
    # p_m = mu0 chi H²/2 for a linear liquid (Rosensweig 1985)
    weak, twice = (push_bound_pa(bench.coils, bench.slug, i) for i in (1e-3, 2e-3))
    assert twice == pytest.approx(4 * weak, rel=1e-4)


def test_coil_that_cannot_open_the_outlet_is_refused_with_both_pressures(edit: Edit) -> None:
    error = refusal(edit(("turns = 1500", "turns = 15")))
    assert error.what == "the coil cannot open the outlet valve"
    assert "push of 790 Pa" in error.bound      # 5 cmH2O = 490.3 Pa (SP 811) + 300 Pa of cracking
    assert load_rig(edit(("turns = 1500", "turns = 600"))).coils[0].turns == 600


@pytest.mark.parametrize(("side", "old"), [("inlet", "60 cmH2O"), ("outlet", "35 cmH2O")])
def test_valve_that_collapses_before_the_other_opens_is_refused(
    edit: Edit, side: str, old: str
) -> None:
    # holds 490.33 Pa of head and the other side's 300 Pa of cracking: pressure balance
    error = refusal(edit((f'collapse = "{old}"', 'collapse = "790 Pa"')))
    assert f"the {side} valve collapses before" in error.what
    assert "790 Pa" in error.bound
    assert load_rig(edit((f'collapse = "{old}"', 'collapse = "791 Pa"')))


def test_slug_longer_than_its_channel_is_refused_in_these_words(edit: Edit) -> None:
    error = refusal(edit(("[channel]", '[channel]\nlength = "15 mm"')))
    assert (error.what, error.bound) == (
        "the slug is longer than the channel", "below 15 mm less its travel")
    assert "do not fit into the channel" in refusal(
        edit(("[channel]", '[channel]\nlength = "30 mm"'))).what
    assert load_rig(edit(("[channel]", '[channel]\nlength = "32 mm"'))).channel.length == 0.032


def test_wire_that_melts_before_its_interlock_acts_is_refused(edit: Edit) -> None:
    """From 105 degC on, 64 ticks and 50 ms of ramp at 3 A in 10.67 ohm: 10.95 J of heat.

    Copper melts at 1084.62 degC (ITS-90): a winding of less than 10.95/979.6 = 0.01118 J/K does so.
    """
    ohm = 8 * (1 + 0.00393 * 85)
    least = 9 * ohm * 0.114 / (1084.6 - 105)
    change = 'winding_heat = "8 J/K"'
    thin = ('winding_to_body = "5 K/W"', 'winding_to_body = "900 K/W"')   # the board can integrate it
    error = refusal(edit(thin, (change, f'winding_heat = "{0.999 * least:.7f} J/K"')))
    assert "the wire melts before the interlock acts" in error.text()
    assert "1084.6 degC within 114 ms" in error.text()
    load_rig(edit(thin, (change, f'winding_heat = "{1.001 * least:.7f} J/K"')))


def test_winding_of_more_than_solid_metal_is_refused(edit: Edit) -> None:
    # bench: 37.7 m of copper of 8 ohm fill the 60 mm² window 2.03 times (1/58 ohm mm²/m, IEC 60028);
    # that is warned about; ten times is no coil at all
    error = refusal(edit(('resistance = "8 ohm"', 'resistance = "1.6 ohm"')))
    assert error.what == "no metal winds such a coil"
    assert "above 16.2 ohm" in error.bound
    assert load_rig(edit(('resistance = "8 ohm"', 'resistance = "1.63 ohm"')))


def test_difference_that_two_sensors_cannot_show_is_refused(edit: Edit) -> None:
    narrow = [('low = "-100 cmH2O"', 'low = "-25 cmH2O"'),
              ('hard = "24 cmH2O"', 'hard = "126 cmH2O"')]
    error = refusal(edit(*narrow))
    assert "the sensors do not reach limits.outlet_reverse" in error.text()
    # 100 + 25 = 125 cmH2O together
    assert "12.2583 kPa" in error.text()
    assert load_rig(edit(narrow[0], ('hard = "24 cmH2O"', 'hard = "125 cmH2O"')))
