"""Prices and proofs against closed forms, and the answer that `check` prints."""

from __future__ import annotations

import json
import math
from pathlib import Path

import pytest
from click.testing import CliRunner

from lodestroke.cli.check import command, examine, finite, labelled
from lodestroke.errors import ScheduleError
from lodestroke.margin import price, prove_plan, prove_static
from lodestroke.margin.price import greatest_push_pa, push_pa
from lodestroke.margin.proof import mean_square_a2
from lodestroke.rig import Rig, load_rig
from lodestroke.schedule import Schedule, compile_program, load_plan, load_schedule

CONFIGS = Path(__file__).parents[3] / "hil_configs"
MU0 = 4e-7 * math.pi     # exact before 2019, within 2e-10 of CODATA 2022


@pytest.fixture(scope="module")
def bench() -> Rig:
    return load_rig(CONFIGS / "bench-sim.toml")


def test_field_in_the_middle_is_that_of_a_thick_solenoid(bench: Rig) -> None:
    """H = J a1 beta ln((alpha + sqrt(alpha² + beta²))/(1 + sqrt(1 + beta²))).

    Source: central field of a thick solenoid, Montgomery, Solenoid Magnet Design, 1969 (from
    memory), alpha = outer/inner radius, beta = length/(2 inner radius).
    """
    coil = bench.coils[0]
    alpha = coil.outer_radius / coil.inner_radius
    beta = coil.length / (2 * coil.inner_radius)
    density = coil.turns * bench.limits.current / (
        coil.length * (coil.outer_radius - coil.inner_radius))
    field = density * coil.inner_radius * beta * math.log(
        (alpha + math.hypot(alpha, beta)) / (1 + math.hypot(1, beta)))
    answer = price(bench)["coils"][0]
    assert answer["field_middle_a_m"] == pytest.approx(field, rel=1e-9)
    assert answer["flux_density_middle_t"] == pytest.approx(MU0 * field, rel=1e-8)


def test_push_follows_the_square_of_current_when_far_from_saturation(bench: Rig) -> None:
    # linear limit of the magnetic pressure: p = mu0 chi H²/2 (Rosensweig 1985)
    small = push_pa(bench, bench.coils[0], 0.0, 1e-4)
    assert push_pa(bench, bench.coils[0], 0.0, 2e-4) == pytest.approx(4 * small, rel=1e-4)
    slug = price(bench)["slug"]
    assert slug["force_at_rest_n"] == pytest.approx(
        slug["push_at_rest_pa"] * math.pi * bench.channel.radius**2)  # type: ignore[operator]


def test_left_out_terms_are_told_with_their_size(bench: Rig) -> None:
    out = price(bench)["left_out"]
    # saturated faces: the traction is at most mu0 Ms²/2, the own field at most N Ms
    assert 0 < out["normal_traction_pa"] <= MU0 * bench.slug.saturation_magnetisation**2 / 2
    assert 0 < out["demagnetisation_factor"] < 1 / 3      # a slug longer than wide
    assert abs(out["own_field_pa"]) <= (
        2 * MU0 * out["demagnetisation_factor"] * bench.slug.saturation_magnetisation**2)


def test_time_to_the_limit_heats_the_winding_to_it(bench: Rig) -> None:
    coil = price(bench)["coils"][0]
    seconds = coil["seconds_to_limit_at_full_current"]
    # with no loss at all it would come no sooner: t = C dT / P, adiabatic
    part, rise = bench.coils[0], bench.limits.coil_temperature.hard - bench.ambient.temperature
    power = bench.limits.current**2 * coil["resistance_at_limit_ohm"]
    assert part.winding_heat * rise / power <= seconds <= 1.2 * part.winding_heat * rise / power


def test_greatest_steady_current_heats_just_to_the_limit() -> None:
    # heat.greatest_current.120C: 17.5 K/W, 5.25 ohm at 20 degC, 25 to 120 degC: 0.861564048573 A
    from lodestroke.margin.coils import greatest_steady_a

    rig = load_rig(CONFIGS / "bench-sim.toml")
    part = rig.coils[0].model_copy(update={
        "resistance": 5.25, "winding_to_body": 3.5, "body_to_air": 14.0})
    assert greatest_steady_a(part, 25.0, 120.0) == pytest.approx(0.861564048573, rel=1e-9)


def test_margin_counts_sensor_doubt_and_overshoot(bench: Rig) -> None:
    for row in price(bench)["interlocks"]:
        assert row["margin_pa"] == pytest.approx(
            row["collapse_pa"] - row["reverse_at_hard_pa"] - row["sensor_pa"]
            - row["collapse_doubt_pa"] - row["overshoot_pa"])
    by_name = {row["interlock"]: row for row in price(bench)["interlocks"]}
    # difference of two sensors of 30 Pa (k = 1) each: 2 sqrt(2) 30 Pa at k = 2 (GUM, uncorrelated)
    assert by_name["outlet_reverse"]["sensor_pa"] == pytest.approx(2 * math.sqrt(2) * 30)


def test_rig_can_destroy_its_own_valve_when_its_limits_are_lifted(bench: Rig) -> None:
    assert greatest_push_pa(bench) > max(valve.collapse for valve in bench.valves.outlet)


def test_proof_of_a_program_tells_numbers_beside_their_bounds(bench: Rig) -> None:
    program = compile_program(load_schedule(CONFIGS / "schedules" / "gentle.toml"), bench)
    proof = prove_static(program, bench)
    assert (proof["ticks"], proof["cycles"], proof["duration_s"]) == (10500, 20, 10.5)
    assert (proof["current_a"], proof["current_bound_a"]) == (1.2, 3.0)
    assert proof["records"] == len(program.rows()) < proof["records_bound"]
    assert bench.ambient.temperature < proof["coil_c"] < proof["coil_bound_c"]
    assert 0 < proof["pressure_bound_pa"] < greatest_push_pa(bench)


def test_mean_square_of_a_trapezoid_is_the_closed_form(bench: Rig) -> None:
    # rise and fall each give I²/3 of their length, hold I²: (20/3 + 80 + 20/3)/250 of 1 A²
    plan = Schedule(waves={"w": {"rise": 0.02, "hold": 0.08, "fall": 0.02, "rest": 0.13,
                                 "current": 1.0}}, steps=[{"wave": "w", "cycles": 7}])
    program = compile_program(plan, bench)
    assert mean_square_a2(program) == pytest.approx((40 / 3 + 80) / 250, rel=1e-9)


def test_plan_is_proved_over_its_whole_length(bench: Rig, tmp_path: Path) -> None:
    plan = load_plan(CONFIGS / "plans" / "short.toml")
    assert prove_plan(plan, bench)["passes"] == 6
    hot = (CONFIGS / "schedules" / "steady.toml").read_text(encoding="utf-8")
    row = next(line for line in hot.split("\n") if line.startswith("current"))
    (tmp_path / "hot.toml").write_text(hot.replace(row, 'current = "1.6 A"'), encoding="utf-8")
    path = tmp_path / "plan.toml"
    path.write_text('schedule = "hot.toml"\ntarget_cycles = 1000000\n', encoding="utf-8")
    with pytest.raises(ScheduleError, match="over the whole plan") as caught:
        prove_plan(load_plan(path), bench)
    assert "105 degC" in caught.value.bound


def test_check_prints_tables_with_defaults_and_units() -> None:
    done = CliRunner().invoke(command, [str(CONFIGS / "bench-sim.toml"),
                                        str(CONFIGS / "schedules" / "gentle.toml")])
    assert done.exit_code == 0
    for words in ("Defaults in force", "limits.stop_ramp", "50 ms", "kA/m", "Static proof",
                  "passes every static bound", "own field", "normal traction"):
        assert words in done.output


def test_check_answers_one_json_object_without_infinities() -> None:
    done = CliRunner().invoke(command, ["--json", str(CONFIGS / "bench-sim.toml")])
    answer = json.loads(done.stdout, parse_constant=pytest.fail)
    assert answer["fingerprint"] == load_rig(CONFIGS / "bench-sim.toml").fingerprint.hex()
    assert answer["defaults"]["limits.stop_ramp"] == "50 ms"
    assert "schedule" not in answer


@pytest.mark.parametrize("arguments", [["missing.toml"], ["--json", "missing.toml"]])
def test_check_of_a_file_that_cannot_be_used_ends_with_code_2(arguments: list[str]) -> None:
    done = CliRunner().invoke(command, arguments)
    assert done.exit_code == 2
    assert "cannot read the rig file" in done.output


def test_check_prints_titles_as_they_are_written(tmp_path: Path) -> None:
    text = (CONFIGS / "bench-sim.toml").read_text(encoding="utf-8")
    row = next(line for line in text.split("\n") if line.startswith("title"))
    path = tmp_path / "odd.toml"
    path.write_text(text.replace(row, 'title = "[/bold] :smile: [red]"'), encoding="utf-8")
    assert "[/bold] :smile: [red]" in CliRunner().invoke(command, [str(path)]).output


def test_names_become_labels_with_units() -> None:
    assert labelled("thermal_slow_s", 389.2) == ("thermal slow", "389.2 s")
    assert labelled("coil_repeated_c", math.inf) == ("coil repeated", "no end (thermal runaway)")
    assert finite({"a": [math.inf, 1.0]}) == {"a": [None, 1.0]}
    assert "crc32" in examine(str(CONFIGS / "bench-sim.toml"),
                              str(CONFIGS / "schedules" / "steady.toml"))["schedule"]
