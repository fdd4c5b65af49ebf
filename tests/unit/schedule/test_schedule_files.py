"""Schedule and plan files: what loads, and what is refused with which words."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from lodestroke.errors import ScheduleError
from lodestroke.schedule import load_plan, load_schedule
from lodestroke.schedule.models import HoldStep, NestedStep, RampStep, RestStep, WaveStep

CONFIGS = Path(__file__).parents[3] / "hil_configs"
Write = Callable[..., Path]


def refusal(path: Path) -> ScheduleError:
    with pytest.raises(ScheduleError) as caught:
        load_schedule(path)
    return caught.value


def test_each_kind_of_step_is_told_by_its_keys(write: Write) -> None:
    schedule = load_schedule(write("""
        [[steps]]
        wave = "soft"
        cycles = 2
        hold = "50 ms"
        [[steps]]
        hold = { current = "0.5 A", time = "1 s" }
        [[steps]]
        ramp = { to = "0 A", over = "1 s" }
        [[steps]]
        rest = "1 s"
        [[steps]]
        times = 3
        [[steps.steps]]
        mark = 4
    """))
    assert [type(step) for step in schedule.steps] == [
        WaveStep, HoldStep, RampStep, RestStep, NestedStep]
    assert schedule.cycles_per_pass == 2
    assert schedule.lines["steps", 4, "steps", 0] == 21


@pytest.mark.parametrize(("name", "cycles"), [
    # 20; 4 + 6 + (4 s at 2 Hz) 8 + (3 s at 4 Hz) 12; 10: counted by hand from the files
    ("gentle", 20), ("rate-sweep", 30), ("steady", 10),
])
def test_cycles_per_pass_are_those_written(name: str, cycles: int) -> None:
    assert load_schedule(CONFIGS / "schedules" / f"{name}.toml").cycles_per_pass == cycles


@pytest.mark.parametrize(("text", "words"), [
    ('[[steps]]\nwave = "sofft"\ncycles = 1', 'known waves: "soft"'),
    ('[[steps]]\nwave = "soft"', "either cycles or a duration"),
    ('[[steps]]\nwave = "soft"\ncycles = 1\nduration = "1 s"', "either cycles or a duration"),
    ('[[steps]]\nwave = "soft"\ncycles = 0', "at least 1"),
    ('[[steps]]\nwave = "soft"\ncycles = 1.5', "a whole number"),
    ('[[steps]]\nwave = "soft"\ncycles = 1\nrate = "2 Hz"', "either hold and rest, or"),
    ('[[steps]]\nwave = "soft"\ncycels = 1', 'did you mean "cycles"?'),
    ('[[steps]]\nrest = "1 A"', '"A" is no unit of time'),
    ('[[steps]]\nrest = 3', 'write "3 ms"'),
    ('[[steps]]\nrest = "-1 s"', "above 0 s"),
    ('[[steps]]\nname = "empty"', "missing"),
    ('[[steps]]\nmark = 70000', "at most 65535"),
    ('[[steps]]\nrest = "1 s"\nlimits = { chamber_hihg = "1 kPa" }', 'mean "chamber_high"?'),
    ("", '"steps" is needed'),
    ('[[steps]]\nramp = { over = "1 s" }', '"to" is needed'),
])
def test_wrong_schedule_is_refused_with_advice(write: Write, text: str, words: str) -> None:
    error = refusal(write(text))
    assert words in error.text()
    assert "s.toml, line" in error.at


@pytest.mark.parametrize(("wave", "words"), [
    ('rate = "4 Hz"', "this wave has no duty"),
    ("duty = 0.4", "this wave has no rate"),
    ('hold = "1 s"', "this wave has no rest"),
    ("", "this wave has no rate"),
    ('rate = "40 Hz"\nduty = 0.4\nrise = "20 ms"', "rise and fall do not fit into the period"),
    ('rate = "4 Hz"\nduty = 1.4', "below 1"),
])
def test_wave_that_cannot_be_is_refused_at_the_wave(write: Write, wave: str, words: str) -> None:
    text = f'[waves.w]\ncurrent = "1 A"\n{wave}\n[[steps]]\nwave = "w"\ncycles = 1\n'
    error = refusal(write(text, waves=""))
    assert words in error.text()
    assert "waves.w" in error.at


def test_schedule_without_steps_is_refused(write: Write) -> None:
    assert "more of them" in refusal(write("steps = []", waves="")).text()


def test_all_problems_of_a_schedule_are_told_at_once(write: Write) -> None:
    two = '[[steps]]\nwave = "a"\ncycles = 1\n[[steps]]\nwave = "b"\ncycles = 2'
    text = refusal(write(two)).text()
    assert "2 problems" in text
    assert "steps[1].wave" in text
    assert "steps[2].wave" in text


def plan(folder: Path, text: str) -> Path:
    (folder / "s.toml").write_text(
        (CONFIGS / "schedules" / "steady.toml").read_text(encoding="utf-8"), encoding="utf-8")
    path = folder / "plan.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_shipped_plan_names_its_schedule_from_its_own_folder() -> None:
    short = load_plan(CONFIGS / "plans" / "short.toml")
    assert short.schedule == CONFIGS / "schedules" / "steady.toml"
    assert short.target_cycles == 60
    assert short.checkup is not None
    assert short.checkup.every_cycles == 30
    assert short.cycles_per_pass == 10


@pytest.mark.parametrize(("text", "words"), [
    ('schedule = "s.toml"\ntarget_cycles = 64', "write 60"),
    ('schedule = "s.toml"\ntarget_cycles = 3', "write 10"),
    ('schedule = "s.toml"\ntarget_cycles = 60\n[checkup]\nevery_cycles = 17\nitems = ["cracking"]',
     "write 20"),
    ('schedule = "s.toml"\ntarget_cycles = 60\n[checkup]\nevery_cycles = 10\nitems = ["craking"]',
     'did you mean "cracking"?'),
    ('schedule = "none.toml"\ntarget_cycles = 60', "cannot read the schedule file"),
    ("target_cycles = 60", '"schedule" is needed'),
    ('schedule = "s.toml"\ntarget_cycles = 60\n[stop]\ntirps = 1', 'did you mean "trips"?'),
])
def test_wrong_plan_is_refused_with_the_nearest_that_fits(
    tmp_path: Path, text: str, words: str
) -> None:
    with pytest.raises(ScheduleError) as caught:
        load_plan(plan(tmp_path, text))
    assert words in caught.value.text()
