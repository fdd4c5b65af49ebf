"""Rig files: what loads, and what is refused with which words."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from lodestroke.errors import RigError
from lodestroke.rig import Rig, load_rig
from lodestroke.rig.defaults import defaults_used

Edit = Callable[..., Path]


def refusal(path: Path) -> RigError:
    with pytest.raises(RigError) as caught:
        load_rig(path)
    return caught.value


def test_rig_holds_si_floats_under_its_toml_keys(bench: Rig, edit: Edit) -> None:
    rig = load_rig(edit(('reform = "0.5 s"', 'reform = "500 ms"')))
    assert rig.valves.inlet[0].reform == 0.5
    assert rig.coils[0].length == pytest.approx(0.02)
    assert rig.ambient.temperature == 22.0
    assert rig.limits.outlet_reverse.hard > rig.limits.outlet_reverse.soft > 1000.0
    assert rig.sensors.inlet is None
    assert bench.source.name == "bench-sim.toml"


def test_fingerprint_follows_values_and_not_how_they_are_written(bench: Rig, edit: Edit) -> None:
    same = load_rig(edit(('reform = "0.5 s"', 'reform = "500 ms"   # same')))
    other = load_rig(edit(('reform = "0.5 s"', 'reform = "501 ms"')))
    assert same.fingerprint == bench.fingerprint
    assert other.fingerprint != bench.fingerprint
    assert len(bench.fingerprint) == 8
    assert json.loads(bench.canonical_json())["board"]["kind"] == "virtual"


def test_all_problems_are_told_at_once_with_their_lines(edit: Edit) -> None:
    error = refusal(edit(
        ('turns = 1500', 'turnz = 1500'), ('density = "1200 kg/m^3"', 'density = 1200'),
        ('tick = "1 ms"', 'tick = "1 A"'), ("[drift]", "[drfit]")))
    text = error.text()
    assert "bench.toml has 5 problems" in text
    assert 'coils[1].turnz: unknown key; got 1500; try: did you mean "turns"?' in text
    assert 'coils[1].turns: missing; got (missing); bound "turns" is needed; try: add it' in text
    assert 'slug.density: number without unit; got 1200; bound a density has a unit; ' \
           'try: write "1200 kg/m^3"' in text
    assert 'board.tick: "A" is no unit of time; got "1 A"' in text
    assert 'drfit: unknown key; got a table; try: did you mean "drift"?' in text


def test_one_problem_is_told_in_five_parts(edit: Edit) -> None:
    error = refusal(edit(('duty_max = 0.95', 'duty_max = 1.95')))
    line = 1 + edit().read_text(encoding="utf-8").split("\n").index("duty_max = 0.95")
    assert (error.what, error.at, error.got, error.bound, error.try_) == (
        "out of bounds", f"bench.toml, line {line}, driver.duty_max", "1.95", "at most 1",
        "choose a value inside the bound")


# What no bench can be: (old text, new text, key, words)
IMPOSSIBLE = [
    ('outer_radius = "5.5 mm"', 'outer_radius = "2 mm"', "outer_radius", "no thickness"),
    ('inner_radius = "2.5 mm"', 'inner_radius = "1 mm"', "inner_radius", "does not fit into"),
    ('length = "20 mm"', 'length = "-20 mm"', "coils[1].length", "above 0 m"),
    ('supply = "30 V"', 'supply = "12 V"', "limits.current", "the supply cannot drive"),
    ('cracking = "300 Pa"', 'cracking = "90 cmH2O"', "collapse", "collapses before it cracks"),
    ('closing = "120 Pa"', 'closing = "301 Pa"', "closing", "closes above its cracking"),
    ('leak = "5e13 Pa*s/m^3"', 'leak = "1e9 Pa*s/m^3"', "leak", "leaks backwards more"),
    ('travel = "', 'travel = "9', "travel", "travels much farther"),
    ('[channel]', '[channel]\nlength = "16 mm"', "slug.length", "do not fit into the channel"),
    ('duty_cycle = 0.6', 'duty_cycle = 1.6', "limits.duty_cycle", "at most 1"),
    ('tick = "1 ms"', 'tick = "1000.3 us"', "board.tick", "whole number of microseconds"),
    ('tick_late = "300 ms"', 'tick_late = "1.5 ms"', "tick_late", "every tick would be late"),
    ('over_current = "3.4 A"', 'over_current = "2.9 A"', "limits.current",
     "not below the over-current"),
    ('bridge = "half"', 'bridge = "hlaf"', "driver.bridge", 'did you mean "half"?'),
    ('counts_high = 14745', 'counts_high = 17000', "counts_high", "beyond the converter"),
    ('counts_high = 14745', 'counts_high = 1000', "counts_high", "do not rise"),
    ('high = "100 cmH2O"', 'high = "30 cmH2O"', "sensors.chamber.high", "does not reach the upper"),
    ('outlet_low = "', 'supply_low = "9 V"\noutlet_low = "', "supply_low", "no supply sensor"),
    ('kind = "air"', 'kind = "none"', "spring", "nothing brings the slug back"),
    ('shape = "circle"', 'shape = "rectangle"', "channel.width", "missing"),
    ('kind = "virtual"', 'kind = "rp2040"', "board.pins", "needs its pins"),
    ('soft = "90 degC"', 'soft = "20 degC"', "coil_temperature.soft", "hot before it starts"),
]


@pytest.mark.parametrize(("old", "new", "key", "words"), IMPOSSIBLE)
def test_rig_that_cannot_be_is_refused_with_the_bound(
    edit: Edit, old: str, new: str, key: str, words: str
) -> None:
    error = refusal(edit((old, new)))
    assert words in error.text()
    assert key in error.text()
    assert error.bound
    assert error.try_


def test_trip_beyond_collapse_is_refused_with_both_numbers_on_a_real_bench(edit: Edit) -> None:
    raised = ('outlet_reverse = { soft = "18 cmH2O", hard = "24 cmH2O" }',
              'outlet_reverse = { soft = "18 cmH2O", hard = "95 cmH2O" }')
    error = refusal(edit(raised, name="bench-rp2040.toml"))
    assert "the trip comes after the outlet valve's collapse" in error.text()
    assert '"95 cmH2O"' in error.text()
    assert "kPa" in error.bound
    assert load_rig(edit(raised)).limits.outlet_reverse.hard > 9000   # simulated: nothing to lose


def test_second_coil_needs_its_current_sensor(edit: Edit) -> None:
    text = edit().read_text(encoding="utf-8")
    coil = text[text.index("[[coils]]"):text.index("[slug]")]
    error = refusal(edit(("[slug]", coil + "[slug]")))
    assert error.what == "missing"
    assert "sensors.coil_b" in error.at
    sensor = text[text.index("[sensors.coil_a]"):text.index("[limits]")]
    both = sensor + sensor.replace("coil_a", "coil_b")
    assert len(load_rig(edit(("[slug]", coil + "[slug]"), (sensor, both))).coils) == 2


def test_pin_used_twice_or_not_on_the_board_is_refused(edit: Edit) -> None:
    text = edit(name="bench-rp2040.toml").read_text(encoding="utf-8")
    row = next(line for line in text.split("\n") if line.startswith("bridge_a"))
    twice = refusal(edit((row, "bridge_a = 15"), ("enable = 15", "enable = 15"),
                         name="bench-rp2040.toml"))
    assert "already" in twice.what
    beyond = refusal(edit((row, "bridge_a = 40"), name="bench-rp2040.toml"))
    assert (beyond.what, beyond.bound) == ("no such pin", "0 to 29 on rp2040")


def test_bad_section_does_not_hide_problems_of_another(edit: Edit) -> None:
    text = refusal(edit(('kind = "virtual"', "kind = 3"),
                        ('closing = "120 Pa"', 'closing = "301 Pa"'))).text()
    assert "board.kind" in text
    assert "closes above its cracking" in text


@pytest.mark.parametrize("broken", ["key = ", "[a\n", 'a = "x', "a = 1\na = 2\n", "\x00"])
def test_broken_toml_is_told_with_its_place(tmp_path: Path, broken: str) -> None:
    path = tmp_path / "broken.toml"
    path.write_text(broken, encoding="utf-8")
    error = refusal(path)
    assert error.what == "this rig file is not valid TOML"
    assert "broken.toml" in error.at
    assert error.got


def test_defaults_are_listed_with_units_and_given_keys_are_not(edit: Edit) -> None:
    used = defaults_used(load_rig(edit()))
    assert used["limits.stop_ramp"] == "50 ms"
    assert used["coils[1].temperature_coefficient"] == "0.00393 1/K"
    assert used["sensors.chamber.jump"] == "not watched"
    assert "limits.host_silence" not in used
    whole = defaults_used(load_rig(edit(('[inlet]\nhead = "0 cmH2O"\n', ""))))
    assert whole["inlet.head"] == "0 Pa"
