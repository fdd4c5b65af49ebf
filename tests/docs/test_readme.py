"""The README's tables and commands are those of the code."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import click
import pytest

from lodestroke import cautions
from lodestroke.cli.main import COMMANDS, group
from lodestroke.errors import Exit

ROOT = Path(__file__).resolve().parents[2]
TEXT = (ROOT / "README.md").read_text(encoding="utf-8")


def section(name: str) -> str:
    """The text below a heading, up to the next of its level."""
    return TEXT.split(f"\n## {name}\n", 1)[1].split("\n## ", 1)[0]


def rows(name: str) -> list[list[str]]:
    """The cells of the table of a section, without its head."""
    lines = [line for line in section(name).splitlines() if line.startswith("|")]
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in lines[2:]]


def typed() -> list[list[str]]:
    """Every lodestroke command of every code block, split as a shell would."""
    found = []
    for block in re.findall(r"```sh\n(.*?)```", TEXT, re.S):
        for line in block.splitlines():
            for part in line.split("&&"):
                words = shlex.split(part, comments=True)
                if words and words[0].rsplit("/", 1)[-1] == "lodestroke":
                    found.append(words[1:])
    return found


def test_exit_codes_are_those_of_the_enum() -> None:
    table = {int(code): name.strip("`") for code, name, _ in rows("Exit codes")}
    assert table == {int(code): code.name for code in Exit}


def test_command_table_names_every_command_once() -> None:
    named = [re.match(r"`([a-z-]+)", row[0]).group(1) for row in rows("Commands")]  # type: ignore[union-attr]
    assert named == list(COMMANDS)


@pytest.mark.parametrize("words", typed(), ids=" ".join)
def test_commands_as_typed_exist_with_their_options_and_files(words: list[str]) -> None:
    context = click.Context(group)
    command = group.get_command(context, words[0])
    assert command is not None
    while isinstance(command, click.Group):
        words = words[1:]
        command = command.get_command(context, words[0])
        assert command is not None
    known = {option for row in command.params for option in row.opts}
    assert {word for word in words if word.startswith("--")} <= known
    for word in words:
        if word.startswith("hil_configs/"):
            assert (ROOT / word).is_file()


def test_options_named_in_the_command_table_exist() -> None:
    context = click.Context(group)
    for first, second in rows("Commands"):
        command = group.get_command(context, re.match(r"`([a-z-]+)", first).group(1))  # type: ignore[union-attr]
        assert command is not None
        known = {option for row in command.params for option in row.opts}
        assert set(re.findall(r"`(--[a-z-]+)`", second)) <= known, first


def test_cautions_of_the_command_are_told_in_the_readme_too() -> None:
    care = section("Before a coil is energised").lower()
    for word in ("burn", "magnets", "pacemakers", "stain", "irritate", "pressure", "cut-out"):
        assert word in care
        assert word in cautions.text().lower(), word


def test_the_picture_of_the_report_is_there() -> None:
    for name in re.findall(r"!\[[^]]*\]\(([^)]+)\)", TEXT):
        assert (ROOT / name).is_file(), name
