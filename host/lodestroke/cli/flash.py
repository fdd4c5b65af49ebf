"""`lodestroke flash RIG`: build the firmware for a rig's board and install it."""

from __future__ import annotations

import click

from ..errors import LodestrokeError
from .common import board_port, emit_json, fail, json_option, say


@click.command()
@click.argument("rig", type=click.Path())
@click.option("--port", help="Serial port; else the one with the rig's USB serial number.")
@json_option
def command(rig: str, port: str | None, as_json: bool) -> None:
    """Install firmware on the rig's board and see it answer.

    The package goes to the slot that is not in use, its sums are checked on the board, the pointer
    is set last. A package that does not prove good falls back to the one before it.
    """
    from ..flash import install
    from ..rig import load_rig

    try:
        loaded = load_rig(rig)
        result = install(loaded, board_port(loaded, port), say)
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json(result)
    else:
        click.echo(f"bundle {result['bundle']} runs from {result['slot']} ({result['seconds']} s)")
