"""The shipped files, mutated at random: a clear error in five parts or a valid load."""

from __future__ import annotations

import atexit
import shutil
import tempfile
from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from lodestroke.errors import RigError, ScheduleError
from lodestroke.rig import limits_blob, load_rig
from lodestroke.rig.locate import lines_of
from lodestroke.schedule import compile_program, load_plan, load_schedule

CONFIGS = Path(__file__).parents[2] / "hil_configs"
RIGS = sorted(CONFIGS.glob("*.toml"))
SCHEDULES = sorted((CONFIGS / "schedules").glob("*.toml"))
PLANS = sorted((CONFIGS / "plans").glob("*.toml"))
FOLDER = Path(tempfile.mkdtemp(prefix="mutated-"))
atexit.register(shutil.rmtree, FOLDER, ignore_errors=True)
RICH = """
[waves.both]
rate = "2 Hz"
duty = "40 %"
current = "1 A"
rise = "20 ms"
coil_b = { current = "0.5 A", phase = "90 deg" }
[waves.times]
rise = "20 ms"
hold = "100 ms"
fall = "20 ms"
rest = "200 ms"
[[steps]]
name = "outer"
times = 2
limits = { outlet_high = "18 cmH2O", current = "2 A" }
  [[steps.steps]]
  wave = "both"
  cycles = 3
  coil_b = { current = "0 A" }
  [[steps.steps]]
  times = 2
    [[steps.steps.steps]]
    wave = "times"
    duration = "2 s"
    current = "0.8 A"
    limits = { coil_temperature = "80 degC" }
    [[steps.steps.steps]]
    mark = 3
[[steps]]
ramp = { to = "1 A", over = "2 s" }
[[steps]]
hold = { current = "1 A", time = "1 s" }
mark = 9
[[steps]]
rest = "1 s"
"""
(FOLDER / "rich.toml").write_text(RICH, encoding="utf-8")
SCHEDULES.append(FOLDER / "rich.toml")

VALUES = [
    "", '""', '"', "0", "-1", "1e400", "nan", "inf", "-inf", "true", "[]", "{}", "[[1], [2]]",
    '"0 A"', '"1 A"', '"1e308 kA"', '"1 cmh2o"', '"35 cmH2O"', '"1 Pa/ "', '"9**9**9 s"', '"5 m^9"',
    '"1 °C"', '"-300 degC"', "1979-05-27", "0x" + "f" * 5000, "1" * 400, '"\\u0000"', "'''a\nb'''",
    '{ soft = "1 Pa", hard = 3 }', '"2 2 s"', '"1 s s"', '"1 kg*m/s"', '"-5 ms"', '"1e-30 s"',
    '"1e9 h"', "[" * 60 + "]" * 60, '"' + "x" * 3000 + '"', '"1 %"', '"1 / s"', '"１２ A"',
]
WORDS = ["steps", "times", "wave", "cycles", "rest", "hold", "ramp", "limits", "mark", "soft",
         "kind", "board", "valves", "x y", '"quoted.key"', "a.b.c", "coil_b", "current", ""]
UNITS = ["Pa", "cmH2O", "A", "mA", "V", "s", "ms", "Hz", "m", "mm", "K/W", "J/K", "degC", "kg", "%"]


@st.composite
def mutation(draw: st.DrawFn) -> tuple[str, int, str]:
    """What to do, where (a large number, taken modulo), and with which text."""
    kind = draw(st.sampled_from(
        ["byte", "cut", "line out", "line twice", "line moved", "value", "key", "unit", "header"]))
    where = draw(st.integers(0, 1 << 20))
    text = {
        "byte": st.binary(min_size=1, max_size=3).map(lambda b: b.decode("latin-1")),
        "value": st.sampled_from(VALUES), "key": st.sampled_from(WORDS),
        "unit": st.sampled_from(UNITS), "header": st.sampled_from(WORDS),
    }.get(kind, st.just(""))
    return kind, where, draw(text)


def mutate(raw: bytes, kind: str, where: int, text: str) -> bytes:
    """One mutation of a file."""
    if kind in ("byte", "cut"):
        at = where % (len(raw) + 1)
        return raw[:at] + text.encode("latin-1") + raw[at + 1:] if kind == "byte" else raw[:at]
    lines = raw.decode("utf-8", "surrogateescape").split("\n")
    at = where % len(lines)
    key, equals, value = lines[at].partition("=")
    if kind == "line out":
        del lines[at]
    elif kind == "line twice":
        lines.insert(at, lines[at])
    elif kind == "line moved":
        lines.insert((where // 7) % len(lines), lines.pop(at))
    elif kind == "header":
        lines.insert(at, f"[{text}]" if where % 2 else f"[[{text}]]")
    elif equals and kind == "value":
        lines[at] = f"{key}= {text}"
    elif equals and kind == "key":
        lines[at] = f"{text} ={value}"
    elif equals and kind == "unit":
        lines[at] = f"{key}={value.rstrip().rstrip(chr(34)).rsplit(' ', 1)[0]} {text}\""
    return "\n".join(lines).encode("utf-8", "surrogateescape")


def mutated(source: Path, changes: list[tuple[str, int, str]]) -> Path:
    raw = source.read_bytes()
    for change in changes:
        raw = mutate(raw, *change)
    path = FOLDER / "mutated.toml"
    path.write_bytes(raw)
    return path


def assert_clear(err: RigError | ScheduleError) -> None:
    """What, where and one of value, bound or advice are told; nothing of Python shows."""
    text = err.text()
    assert err.what.strip()
    assert "mutated.toml" in text or err.at
    assert err.at
    assert err.got
    assert err.bound or err.try_
    assert "Traceback" not in text
    assert "pydantic" not in text
    assert text.isprintable() or {c for c in text if not c.isprintable()} <= {"\n"}


MANY = settings(max_examples=250, deadline=None,
                suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])


@MANY
@given(source=st.sampled_from(RIGS), changes=st.lists(mutation(), min_size=1, max_size=3))
@example(source=RIGS[0], changes=[("value", 10, "nan")])
def test_rig_file_gives_a_clear_error_or_loads_when_mutated(
    source: Path, changes: list[tuple[str, int, str]]
) -> None:
    try:
        limits_blob(load_rig(mutated(source, changes)))
    except RigError as err:
        assert_clear(err)


@MANY
@given(source=st.sampled_from(SCHEDULES), changes=st.lists(mutation(), min_size=1, max_size=3))
def test_schedule_file_gives_a_clear_error_or_compiles_when_mutated(
    source: Path, changes: list[tuple[str, int, str]]
) -> None:
    try:
        compile_program(load_schedule(mutated(source, changes)), rig())
    except ScheduleError as err:
        assert_clear(err)


@settings(MANY, max_examples=80)
@given(source=st.sampled_from(PLANS), changes=st.lists(mutation(), min_size=1, max_size=3))
def test_plan_file_gives_a_clear_error_or_loads_when_mutated(
    source: Path, changes: list[tuple[str, int, str]]
) -> None:
    try:
        load_plan(mutated(source, changes))
    except ScheduleError as err:
        assert_clear(err)


def test_rich_schedule_compiles_as_it_stands() -> None:
    # 2 times (3 strokes and 2 times 2 s of 0.34 s strokes, 6 after rounding)
    assert compile_program(load_schedule(FOLDER / "rich.toml"), rig()).cycles == 30


@pytest.mark.parametrize("make", ["missing", "folder", "binary", "nul name"])
def test_rig_file_gives_a_clear_error_when_it_is_no_text_file(tmp_path: Path, make: str) -> None:
    path: Path | str = tmp_path / "mutated.toml"
    if make == "folder":
        Path(path).mkdir()
    elif make == "binary":
        Path(path).write_bytes(bytes(range(256)) * 8)
    elif make == "nul name":
        path = "mutated.toml\0"
    with pytest.raises(RigError) as caught:
        load_rig(path)
    assert_clear(caught.value) if make != "nul name" else None
    assert caught.value.bound


@pytest.mark.parametrize("value", VALUES)
@pytest.mark.parametrize("key", ["tick", "turns", "collapse", "outlet_high", "counts_low", "kind"])
def test_rig_value_gives_a_clear_error_or_loads_when_it_is_nonsense(key: str, value: str) -> None:
    lines = RIGS[-1].read_text(encoding="utf-8").split("\n")
    at = next(i for i, line in enumerate(lines) if line.startswith(f"{key} "))
    lines[at] = f"{key} = {value}"
    path = FOLDER / "mutated.toml"
    path.write_text("\n".join(lines), encoding="utf-8")
    told = ""
    try:
        limits_blob(load_rig(path))
    except RigError as err:
        assert_clear(err)
        told = err.text()
    sound = value in ('"35 cmH2O"', '"0 A"', '"1 A"')   # then another key is what is wrong
    if told and not sound and "not valid TOML" not in told and "nested" not in told:
        assert f"line {at + 1}," in told


@given(st.lists(mutation(), max_size=2))
@settings(MANY, max_examples=60)
def test_line_numbers_are_found_for_every_key_that_a_parser_finds(
    changes: list[tuple[str, int, str]]
) -> None:
    from lodestroke.rig.toml_file import tomllib

    raw = RIGS[-1].read_bytes()
    for change in changes:
        raw = mutate(raw, *change)
    try:
        text = raw.decode("utf-8").replace("\r\n", "\n")
        data = tomllib.loads(text)
    except (ValueError, RecursionError):
        return
    lines = lines_of(text)
    rows = text.split("\n")
    for path in _leaves(data, ()):
        assert path in lines
        last = next(p for p in reversed(path) if isinstance(p, str))
        assert last in rows[lines[path] - 1] or "\\" in text or isinstance(path[-1], int)


def _leaves(value: object, path: tuple[str | int, ...]) -> list[tuple[str | int, ...]]:
    if isinstance(value, dict):
        return [leaf for k, v in value.items() for leaf in _leaves(v, (*path, k))]
    if isinstance(value, list):
        return [leaf for k, v in enumerate(value) for leaf in _leaves(v, (*path, k))]
    return [path]


def rig():  # type: ignore[no-untyped-def]
    """The simulated bench, once."""
    if not _RIG:
        _RIG.append(load_rig(CONFIGS / "bench-sim.toml"))
    return _RIG[0]


_RIG: list[object] = []
