"""Wrong files, ports and logbooks: one clear error in five parts, the right code, no traceback."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from lodestroke.errors import Exit

if TYPE_CHECKING:
    from conftest import Run

CONFIGS = Path(__file__).resolve().parents[3] / "hil_configs"
SIM, REAL = CONFIGS / "bench-sim.toml", CONFIGS / "bench-rp2040.toml"
GENTLE = CONFIGS / "schedules" / "gentle.toml"
SHORT = CONFIGS / "plans" / "short.toml"
NOWHERE = "/dev/no-such-port"


def command_lines(
    rig: object, schedule: object = GENTLE, plan: object = SHORT
) -> list[list[object]]:
    return [
        ["check", rig],
        ["check", rig, schedule],
        ["dry-run", rig, schedule],
        ["flash", rig, "--port", NOWHERE],
        ["run", rig, schedule, "--port", NOWHERE],
        ["endure", rig, plan, "--port", NOWHERE],
        ["board", rig],
    ]


def five(parts: dict[str, str]) -> bool:
    return {"what", "at", "got", "bound", "try"} <= set(parts)


@pytest.mark.parametrize("words", command_lines("no-such.toml"), ids=lambda words: str(words[0]))
def test_a_rig_that_is_not_there_is_bad_input_to_every_command(
    lodestroke: Run, words: list[object]
) -> None:
    ended = lodestroke(*words)
    assert ended.code == Exit.BAD_INPUT
    assert five(ended.parts())
    assert "no-such.toml" in ended.err


@pytest.mark.parametrize(
    "content", [b"", b"\xff\xfe\x00broken", b"tick = ", b"[board]\nkind = 3\n"]
)
def test_a_rig_that_is_none_is_bad_input(lodestroke: Run, tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "bad.toml"
    path.write_bytes(content)
    ended = lodestroke("dry-run", path, GENTLE)
    assert ended.code == Exit.BAD_INPUT
    assert "bad.toml" in ended.err


def test_a_folder_in_place_of_a_file_is_bad_input(lodestroke: Run, tmp_path: Path) -> None:
    for words in (
        ["check", tmp_path],
        ["dry-run", SIM, tmp_path],
        ["endure", SIM, tmp_path, "--port", NOWHERE],
    ):
        assert lodestroke(*words).code == Exit.BAD_INPUT


def test_a_schedule_given_as_plan_and_a_plan_as_schedule_are_told_apart(lodestroke: Run) -> None:
    assert lodestroke("endure", SIM, GENTLE, "--port", NOWHERE).code == Exit.BAD_INPUT
    assert lodestroke("dry-run", SIM, SHORT).code == Exit.BAD_INPUT


def test_an_unknown_place_is_refused_with_the_known_ones(lodestroke: Run) -> None:
    ended = lodestroke("dry-run", SIM, GENTLE, "--on", "moon")
    assert ended.code == Exit.BAD_INPUT
    assert ended.parts()["bound"] == "twin, virtual"


@pytest.mark.parametrize(
    "words",
    [
        ["flash", SIM, "--port", NOWHERE],
        ["run", SIM, GENTLE, "--port", NOWHERE],
        ["endure", SIM, SHORT, "--port", NOWHERE],
        ["run", SIM, GENTLE],
        ["endure", SIM, SHORT],
    ],
    ids=lambda words: " ".join(str(word) for word in words[::3]),
)
def test_a_port_that_is_missing_or_not_named_has_its_own_code(
    lodestroke: Run, words: list[object]
) -> None:
    ended = lodestroke(*words)
    assert ended.code == Exit.NO_PORT
    assert five(ended.parts())


def test_a_file_in_place_of_a_port_is_told(lodestroke: Run, tmp_path: Path) -> None:
    path = tmp_path / "port"
    path.write_text("no port")
    assert lodestroke("run", SIM, GENTLE, "--port", path).code == Exit.NO_PORT


@pytest.fixture
def terminal() -> Iterator[tuple[int, str]]:
    """A pseudo-terminal: our end, and the name for the command."""
    pty = pytest.importorskip("pty", reason="no pseudo-terminals here")
    import tty

    ours, theirs = pty.openpty()
    tty.setraw(theirs)
    yield ours, os.ttyname(theirs)
    os.close(ours)
    os.close(theirs)


def test_a_silent_port_is_given_up_in_bounded_time(
    lodestroke: Run, terminal: tuple[int, str]
) -> None:
    began = time.monotonic()
    ended = lodestroke("run", SIM, GENTLE, "--port", terminal[1])
    assert ended.code == Exit.LINK
    assert "does not answer" in ended.parts()["what"]
    assert "lodestroke flash" in ended.parts()["try"]
    assert time.monotonic() - began < 30


def test_a_port_that_talks_nonsense_is_told_with_what_it_said(
    lodestroke: Run, terminal: tuple[int, str]
) -> None:
    ended = threading.Event()

    def talk() -> None:
        while not ended.wait(0.05):
            os.write(terminal[0], b"ready> \xa5\xa5\x00\xff")

    talker = threading.Thread(target=talk)
    talker.start()
    try:
        said = lodestroke("endure", SIM, SHORT, "--port", terminal[1])
    finally:
        ended.set()
        talker.join()
    assert said.code == Exit.LINK
    assert "ready>" in said.parts()["got"]


def test_a_busy_port_is_told(lodestroke: Run, terminal: tuple[int, str]) -> None:
    from lodestroke.link import open_port

    holder = open_port(terminal[1])
    try:
        ended = lodestroke("run", SIM, GENTLE, "--port", terminal[1])
    finally:
        holder.close()
    assert ended.code == Exit.NO_PORT
    assert "another" in ended.err.lower() or "busy" in ended.err.lower()


def test_a_real_board_is_not_energised_without_cautions_and_a_yes(lodestroke: Run) -> None:
    ended = lodestroke("run", REAL, GENTLE, "--port", NOWHERE)
    assert ended.code == Exit.BAD_INPUT
    assert ended.parts()["at"] == "--yes"
    for word in ("burn", "pacemaker", "pressure"):
        assert word in ended.err.lower()
    assert lodestroke("run", REAL, GENTLE, "--port", NOWHERE, "--yes").code == Exit.NO_PORT


def test_an_unattended_real_bench_needs_its_cutout_said(lodestroke: Run) -> None:
    ended = lodestroke("endure", REAL, SHORT, "--port", NOWHERE, "--yes")
    assert ended.code == Exit.BAD_INPUT
    assert ended.parts()["at"] == "--cutout-fitted"
    both = lodestroke("endure", REAL, SHORT, "--port", NOWHERE, "--yes", "--cutout-fitted")
    assert both.code == Exit.NO_PORT


@pytest.mark.parametrize(
    "words",
    [
        ["run", SIM, GENTLE, "--port", NOWHERE],
        ["endure", SIM, SHORT, "--port", NOWHERE],
        ["log", "list"],
        ["report", "last"],
    ],
    ids=lambda words: str(words[0]),
)
def test_a_logbook_that_is_none_has_its_own_code_and_is_left_alone(
    lodestroke: Run, tmp_path: Path, words: list[object]
) -> None:
    path = tmp_path / "notes.txt"
    path.write_text("no database, and mine\n" * 200)
    before = path.read_bytes()
    ended = lodestroke("--logbook", path, *words)
    assert ended.code in (Exit.LOGBOOK, Exit.NO_PORT)
    assert path.read_bytes() == before


def test_files_of_a_dry_run_that_cannot_be_written_are_told(
    lodestroke: Run, tmp_path: Path
) -> None:
    taken = tmp_path / "taken"
    taken.write_text("a file")
    ended = lodestroke("dry-run", SIM, GENTLE, "--out", taken)
    assert ended.code == Exit.BAD_INPUT
    assert "--out" in ended.parts()["at"]


def test_a_plan_that_would_cook_the_coil_is_refused_before_any_port_is_opened(
    lodestroke: Run, tmp_path: Path
) -> None:
    steady = (CONFIGS / "schedules" / "steady.toml").read_text(encoding="utf-8")
    (tmp_path / "hot.toml").write_text(steady.replace('"0.9 A"', '"2.2 A"'), encoding="utf-8")
    plan = tmp_path / "plan.toml"
    text = SHORT.read_text(encoding="utf-8").replace("../schedules/steady.toml", "hot.toml")
    plan.write_text(text.replace("target_cycles = 60", "target_cycles = 60000"), encoding="utf-8")
    ended = lodestroke("endure", SIM, plan, "--port", NOWHERE)
    assert ended.code == Exit.BAD_INPUT
    assert ended.parts()["what"] == "the coil would get too hot over the whole plan"
