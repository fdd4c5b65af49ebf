"""Names of runs: ids, short forms of ids, and "last"."""

from __future__ import annotations

import difflib

import sqlalchemy as sa

from ..errors import LogbookError
from . import schema
from .open import Logbook


def resolve(logbook: Logbook, name: str) -> str:
    """A run's id from its id ("r0012"), its number ("12", "r12") or "last".

    Raises LogbookError naming the nearest and the newest runs.
    """
    with logbook.read() as connection:
        query = sa.select(schema.runs.c.id).order_by(schema.runs.c.serial.desc())
        ids = [str(run) for run in connection.execute(query).scalars()]
    if name == "last" and ids:
        return ids[0]
    number = name.lower().removeprefix("r")
    if number.isascii() and number.isdigit() and len(number) < 10:
        name = f"r{int(number):04d}"
    if name in ids:
        return name
    near = difflib.get_close_matches(name, ids, 2)
    raise LogbookError(
        "no such run",
        at=logbook.name,
        got=name,
        bound=", ".join(["last", *dict.fromkeys(near + ids[:4])])
        if ids
        else "a run; the logbook is empty",
        try_="lodestroke log list" if ids else "run something first: lodestroke demo",
    )
