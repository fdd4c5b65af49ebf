"""What every command shares: where talk goes, how errors end, how Ctrl-C is met."""

from __future__ import annotations

import json
import sys
from typing import Any, NoReturn

import click

from ..errors import Exit, LodestrokeError


class NotConfirmed(LodestrokeError):
    """A question that nobody could answer."""

    exit_code = Exit.BAD_INPUT


def say(text: str) -> None:
    """Talk: to standard error, so that standard output stays the answer."""
    click.echo(text, err=True)


def emit_json(answer: Any) -> None:
    """The one JSON object of a --json command."""
    click.echo(json.dumps(answer, indent=2, sort_keys=False, default=str))


def fail(error: LodestrokeError, as_json: bool = False) -> NoReturn:
    """Say what went wrong in its five parts and end with its exit code."""
    if as_json:
        emit_json(error.as_json())
    say(error.text())
    raise SystemExit(int(error.exit_code))


def crash(fault: BaseException) -> NoReturn:
    """A fault of ours: one clear message, the traceback in a file."""
    import tempfile
    import traceback

    with tempfile.NamedTemporaryFile(
        "w", prefix="lodestroke-crash-", suffix=".txt", delete=False, encoding="utf-8"
    ) as file:
        traceback.print_exception(type(fault), fault, fault.__traceback__, file=file)
    fail(
        LodestrokeError(
            "Lodestroke itself failed",
            at="lodestroke " + " ".join(sys.argv[1:]),
            got=f"{type(fault).__name__}: {fault}",
            bound="no fault of ours",
            try_=f"report it with the details in {file.name}",
        )
    )


class Progress:
    """A line of progress with time left on a terminal; nothing elsewhere."""

    def __init__(self, label: str, total: float, unit: str) -> None:
        self.bar: Any = None
        if not sys.stderr.isatty():
            return
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

        self.bar = Progress(
            TextColumn("{task.description}"),
            BarColumn(),
            TextColumn("{task.completed:.0f}/{task.total:.0f} " + unit),
            TimeRemainingColumn(),
            console=Console(stderr=True),
            transient=True,
        )
        self.bar.start()
        self.task = self.bar.add_task(label, total=total)

    def to(self, done: float) -> None:
        """So much is done."""
        if self.bar is not None:
            self.bar.update(self.task, completed=done)

    def close(self) -> None:
        """Take the line away."""
        if self.bar is not None:
            self.bar.stop()
            self.bar = None


def json_option(function: Any) -> Any:
    """--json, the same everywhere."""
    return click.option(
        "--json",
        "as_json",
        is_flag=True,
        help="One JSON object on standard output, talk on standard error.",
    )(function)


def confirm_energising(kind: str, yes: bool) -> None:
    """Before current flows on metal: the cautions, and a yes."""
    from .. import cautions

    if kind == "virtual":
        return
    say("Before current flows:")
    say(cautions.text())
    if yes:
        return
    if not sys.stdin.isatty():
        fail(
            NotConfirmed(
                "nobody said yes to energising the coil",
                at="--yes",
                got="no terminal to ask on",
                bound="a yes",
                try_="read the cautions above, then add --yes",
            )
        )
    if not click.confirm("Energise the coil?", default=False, err=True):
        say("nothing was energised")
        raise SystemExit(int(Exit.INTERRUPTED))


def open_log(context: click.Context, create: bool = True) -> Any:
    """The logbook that --logbook, the environment or the default names."""
    from ..logbook import open_logbook

    return open_logbook((context.obj or {}).get("logbook"), create=create)


def board_port(rig: Any, named: str | None) -> str:
    """The port that was named, or the one that carries the rig's board."""
    from ..link import find_port

    return named or find_port(rig.board.port.usb_serial or None)
