"""`lodestroke watch`: a live page on this machine."""

from __future__ import annotations

import click

from ..errors import LodestrokeError
from .common import fail, open_log, say


@click.command()
@click.option("--run", help="A run; otherwise the newest, whichever that is then.")
@click.option("--port", default=0, help="Network port on 127.0.0.1; otherwise a free one.")
@click.option("--open/--no-open", "show", default=True, help="Open the page in a browser.")
@click.pass_context
def command(ctx: click.Context, run: str | None, port: int, show: bool) -> None:
    """Serve a live page on 127.0.0.1, with a stop button. Ctrl-C ends the page, not the run."""
    import threading
    import webbrowser

    from ..logbook import reader
    from ..runner.signals import StopFlag
    from ..watch import Server

    try:
        logbook = open_log(ctx)
        if run:
            run = reader.resolve(logbook, run)
        server = Server(logbook, run, port)
    except LodestrokeError as error:
        fail(error)
    thread = threading.Thread(target=server.serve_forever, daemon=True)
    with StopFlag() as flag:
        thread.start()
        click.echo(server.url)
        if show:
            webbrowser.open(server.url)
        while not flag.raised:
            thread.join(0.2)
    server.shutdown()
    server.server_close()
    say("the page has ended; a run that was going on still does")
