"""`lodestroke`: names of commands, and nothing heavy until one of them runs."""

from __future__ import annotations

import difflib
import importlib
import signal
import sys

import click

from .. import __version__

COMMANDS = {
    "check": "Price a rig before power; with a schedule, its static proof.",
    "dry-run": "Run a schedule on the twin or the virtual board.",
    "prove": "Vary the pump, inject faults, hold the invariants; shrink what fails.",
    "flash": "Build the firmware bundle and install it on a board.",
    "run": "Run a schedule on a board and log it.",
    "endure": "Run an endurance plan; resumable.",
    "board": "Keep a virtual board up in the foreground.",
    "log": "List, show, export and verify runs.",
    "report": "Write a self-contained page of a run.",
    "watch": "Serve a live page on this machine, with a stop button.",
    "demo": "The whole line on a virtual bench, in about a minute.",
}


class Lazy(click.Group):
    """Commands by name; their modules are imported when they are used."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """In the order of the work."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of this name, or None."""
        if cmd_name not in COMMANDS:
            return None
        module = importlib.import_module("lodestroke.cli." + cmd_name.replace("-", "_"))
        command: click.Command = module.command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """As click does, with the nearest name for one that is unknown."""
        if args and args[0] not in COMMANDS and not args[0].startswith("-"):
            near = difflib.get_close_matches(args[0], COMMANDS, 1)
            hint = f" Did you mean '{near[0]}'?" if near else ""
            ctx.fail(f"No such command '{args[0]}'.{hint}")
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """From the table: help imports no command."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.command(cls=Lazy, context_settings={"help_option_names": ["-h", "--help"]})
@click.option(
    "--logbook",
    metavar="PATH-or-URL",
    help="Where runs live; else LODESTROKE_LOGBOOK, else a file in your data folder.",
)
@click.version_option(__version__, prog_name="lodestroke")
@click.pass_context
def group(ctx: click.Context, logbook: str | None) -> None:
    """A bench kit for small pumps that have no solid moving parts."""
    ctx.obj = {"logbook": logbook}


def _like_ctrl_c(_number: int, _frame: object) -> None:
    """SIGTERM, until a command takes it over: the same clean end as Ctrl-C."""
    raise KeyboardInterrupt


def main() -> None:
    """Entry point: no traceback ever reaches the user."""
    from ..errors import Interrupted, LodestrokeError
    from .common import crash, fail

    signal.signal(signal.SIGTERM, _like_ctrl_c)
    try:
        group(prog_name="lodestroke", standalone_mode=False)
    except click.exceptions.Exit as leaving:
        sys.exit(leaving.exit_code)
    except click.ClickException as wrong:
        wrong.show()
        sys.exit(2)
    except (click.Abort, KeyboardInterrupt):
        fail(Interrupted("interrupted", try_="run the same command again"))
    except LodestrokeError as error:
        fail(error)
    except BrokenPipeError:
        sys.exit(0)
    except Exception as fault:
        crash(fault)


if __name__ == "__main__":
    main()
