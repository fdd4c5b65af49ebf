"""What databases say, in five parts."""

from __future__ import annotations

from sqlalchemy.exc import DBAPIError, SQLAlchemyError

from ..errors import LogbookError

# sign in the database's text: what it means, what to do
_SIGNS = (
    (
        "full",
        "the disk is full",
        "free some space, then resume; nothing already logged is lost",
    ),
    ("locked", "somebody else holds the logbook", "end the program that holds it"),
    ("not a database", "this file is no logbook", "name another file with --logbook"),
    (
        "malformed",
        "the logbook is damaged",
        "copy the file away, run lodestroke log verify, and restore a backup",
    ),
    (
        "readonly",
        "the logbook cannot be written",
        "give yourself the right to write it, or copy it where you may",
    ),
    (
        "unable to open",
        "the logbook cannot be opened",
        "look at the rights of the file and of its folder, or name another",
    ),
    ("utf-8", "the logbook is damaged", "run lodestroke log verify, and restore a backup"),
    (
        "disk i/o error",
        "the disk failed or has no room",
        "look at the disk and its free space; nothing already logged is lost",
    ),
    (
        "no such column",
        "the logbook was written by another version",
        "use the version of Lodestroke that wrote it",
    ),
    (
        "connect",
        "the database cannot be reached",
        "look at host, port, user and network, and whether the server runs",
    ),
)


def worded(place: str, fault: SQLAlchemyError) -> LogbookError:
    """A database error as one of ours."""
    text = str(fault.orig) if isinstance(fault, DBAPIError) else str(fault)
    got = text.splitlines()[0] if text else type(fault).__name__
    for sign, what, advice in _SIGNS:
        if sign in text.lower():
            return LogbookError(
                what,
                at=place,
                got=got,
                bound="a logbook that can be read and written",
                try_=advice,
            )
    return refused(
        place,
        got,
        "a logbook that can be read and written",
        "look at the disk and the file's rights",
    )


def damaged(place: str, fault: Exception) -> LogbookError:
    """A stored value that is not what a writer of ours put there."""
    return LogbookError(
        "the logbook is damaged",
        at=place,
        got=f"{type(fault).__name__}: {fault}",
        bound="rows as they were written",
        try_="run lodestroke log verify, and restore a backup",
    )


def refused(place: str, got: str, bound: str, try_: str) -> LogbookError:
    """A logbook that we will not use, and why."""
    return LogbookError("the logbook cannot be used", at=place, got=got, bound=bound, try_=try_)
