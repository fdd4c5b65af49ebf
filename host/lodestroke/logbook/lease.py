"""One writer a run: a lease on its row, renewed with each flush, taken over once it is stale."""

from __future__ import annotations

import os
import platform
import secrets
import socket
import time
from typing import Any

import sqlalchemy as sa

from ..errors import LogbookError
from . import schema
from .open import Logbook

LEASE_S = 15.0
_runs = schema.runs.c


def take(logbook: Logbook, run: str) -> str:
    """Take the run; the name that holds it now. Raises LogbookError saying who has it."""
    owner = f"{socket.gethostname()}:{os.getpid()}:{secrets.token_hex(4)}"
    now_s = time.time()
    with logbook.write() as connection:
        held = connection.execute(
            sa.select(_runs.lease_owner).where(_runs.id == run)
        ).scalar_one_or_none()
        free = sa.or_(
            _runs.lease_owner.is_(None),
            _runs.lease_until < now_s,
            _runs.lease_until > now_s + 4 * LEASE_S,  # the clock was set back
        )
        if held and _gone(held):
            free = sa.or_(free, _runs.lease_owner == held)
        taken = connection.execute(
            schema.runs.update()
            .where(_runs.id == run, free)
            .values(lease_owner=owner, lease_until=now_s + LEASE_S)
        ).rowcount
    if not taken:
        raise LogbookError(
            "another process is writing this run" if held else "no such run",
            at=f"{logbook.name}, run {run}",
            got=f"held by {held}" if held else run,
            bound="one writer a run" if held else "a run of this logbook",
            try_=f"end that process; a dead one's hold lapses within {LEASE_S:g} s"
            if held
            else "lodestroke log list",
        )
    return owner


def renew(connection: sa.Connection, logbook: Logbook, run: str, owner: str) -> sa.RowMapping:
    """Hold the run for longer, in a transaction that is about to write it; the run's account.

    Raises LogbookError when somebody took it over meanwhile: this writer must not go on.
    """
    renewed = connection.execute(
        schema.runs.update()
        .where(_runs.id == run, _runs.lease_owner == owner)
        .values(lease_until=time.time() + LEASE_S)
    ).rowcount
    row = (
        connection.execute(
            sa.select(_runs.lease_owner, _runs.chain, _runs.chunks, _runs.counts).where(
                _runs.id == run
            )
        )
        .mappings()
        .first()
    )
    if not renewed or row is None:
        raise LogbookError(
            "another process has taken this run over",
            at=f"{logbook.name}, run {run}",
            got=f"held by {row['lease_owner'] if row else 'nobody'}",
            bound=f"a flush at least every {LEASE_S:g} s by {owner}",
            try_="let the other process go on; this one writes nothing more",
        )
    return row


def give_back(connection: sa.Connection, run: str, owner: str) -> None:
    """Leave the run to whoever comes next."""
    nobody: dict[str, Any] = {"lease_owner": None, "lease_until": 0.0}
    connection.execute(
        schema.runs.update().where(_runs.id == run, _runs.lease_owner == owner).values(**nobody)
    )


def _gone(owner: str) -> bool:
    """Whether the owner was a process of this machine that is no longer there."""
    host, _, rest = owner.rpartition(":")[0].rpartition(":")
    if host != socket.gethostname() or platform.system() == "Windows":
        return False
    try:
        os.kill(int(rest), 0)
    except ProcessLookupError:
        return True
    except (OSError, ValueError):
        pass
    return False
