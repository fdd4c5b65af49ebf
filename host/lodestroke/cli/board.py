"""`lodestroke board RIG`: a virtual board in the foreground, until SIGTERM or Ctrl-C."""

from __future__ import annotations

import click

from ..errors import LodestrokeError
from .common import fail, say


@click.command()
@click.argument("rig", type=click.Path())
@click.option("--link", default="", metavar="PATH", help="A stable name for the port (a link).")
@click.option("--seed", default=0, show_default=True, help="Seed of the simulated sensors' noise.")
@click.option(
    "--keep", default="", metavar="FOLDER",
    help="Keep the board's file system here; otherwise it goes with the board.",
)
def command(rig: str, link: str, seed: int, keep: str) -> None:
    """Keep a virtual board up and print its port.

    The board is a real MicroPython behind a pseudo-terminal: flash it, run on it, open it with
    mpremote. It starts empty, like a new board: `lodestroke flash RIG --port PORT` comes first.
    """
    import tempfile
    from pathlib import Path

    from ..virtual.relay import Relay
    from ..virtual.serve import BoardConfig, serve

    def ready(relay: Relay) -> None:
        click.echo(relay.port)
        say(f"virtual board up{', linked as ' + link if link else ''}; SIGTERM or Ctrl-C ends it")
        say(f"next: lodestroke flash {rig} --port {link or relay.port}")

    try:
        work = tempfile.mkdtemp(prefix="lodestroke-")
        flash = Path(keep).absolute() if keep else Path(work) / "flash"
        flash.mkdir(parents=True, exist_ok=True)
        serve(BoardConfig(rig=rig, work=work, flash=str(flash), seed=seed, link=link), ready)
    except LodestrokeError as error:
        fail(error)
    say("virtual board ended")
