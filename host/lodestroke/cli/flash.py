"""`lodestroke flash RIG`: build the firmware for a rig's board and install it."""

from __future__ import annotations

import click

from ..errors import LodestrokeError
from .common import emit_json, fail, say


@click.command()
@click.argument("rig", type=click.Path())
@click.option("--port", default="", help="Serial port; otherwise the rig's USB serial number.")
@click.option("--json", "as_json", is_flag=True, help="The result as one JSON object on stdout.")
def command(rig: str, port: str, as_json: bool) -> None:
    """Install firmware on the rig's board and see it answer.

    The package goes to the slot that is not in use, its sums are checked on the board, the pointer
    is set last. A package that does not prove good falls back to the one before it.
    """
    from ..flash import install
    from ..link import find_port
    from ..rig import load_rig

    try:
        loaded = load_rig(rig)
        name = port or find_port(loaded.board.port.usb_serial or None)
        result = install(loaded, name, say)
    except LodestrokeError as error:
        fail(error)
        return
    if as_json:
        emit_json(result)
    else:
        click.echo(f"bundle {result['bundle']} runs from {result['slot']} ({result['seconds']} s)")
