"""Opening a logbook: a SQLite file by default, any database that SQLAlchemy reaches by URL."""

from __future__ import annotations

import os
from pathlib import Path

import sqlalchemy as sa
from sqlalchemy import event
from sqlalchemy.exc import ArgumentError, DBAPIError, NoSuchModuleError, SQLAlchemyError

from ..errors import LogbookError
from . import schema

ENVIRONMENT = "LODESTROKE_LOGBOOK"


def default_path() -> Path:
    """The logbook in the user's data folder."""
    import platformdirs

    return Path(platformdirs.user_data_dir("lodestroke")) / "logbook.db"


class Logbook:
    """An open logbook: its engine and the name that users know it by."""

    def __init__(self, engine: sa.Engine, name: str) -> None:
        self.engine = engine
        self.name = name

    def close(self) -> None:
        """Let go of the database."""
        self.engine.dispose()


def open_logbook(where: str | Path | None = None, *, create: bool = True) -> Logbook:
    """Open the logbook at a path or URL, or the one that environment or default name.

    create=False: a file that is not there is an error. Raises LogbookError.
    """
    place = str(where or os.environ.get(ENVIRONMENT) or default_path())
    url = place if "://" in place else _file_url(place, create)
    try:
        engine = sa.create_engine(url, connect_args=_arguments(url))
        if engine.dialect.name == "sqlite":
            event.listen(engine, "connect", _settings)
        with engine.begin() as connection:
            _settle_schema(connection, place)
    except NoSuchModuleError as fault:
        raise _bad(
            place, str(fault), "sqlite, postgresql", "name a database that is known"
        ) from fault
    except ModuleNotFoundError as fault:
        raise _bad(
            place, f"no driver: {fault.name}", "an installed driver", f"pip install {fault.name}"
        ) from fault
    except (ArgumentError, ValueError) as fault:
        raise _bad(
            place, str(fault).splitlines()[0], "a path or a database URL", "mend it"
        ) from fault
    except SQLAlchemyError as fault:
        raise worded(place, fault) from fault
    return Logbook(engine, place)


def _file_url(place: str, create: bool) -> str:
    path = Path(place).expanduser()
    if path.is_dir():
        raise _bad(place, "a folder", "a file", f"name a file, {path / 'logbook.db'} say")
    if not path.exists():
        if not create:
            raise _bad(
                place,
                "no such file",
                "a logbook",
                "name it with --logbook, or make one by running something",
            )
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
        except OSError as fault:
            raise _bad(place, str(fault), "a folder that can be written", "name another") from fault
    return f"sqlite:///{path}"


def _arguments(url: str) -> dict[str, object]:
    return {"timeout": 10.0} if url.startswith("sqlite") else {}


def _settings(connection, _record) -> None:  # type: ignore[no-untyped-def]
    """Durable before acknowledged: WAL with a sync at each commit."""
    cursor = connection.cursor()
    cursor.execute("PRAGMA journal_mode=WAL")
    cursor.execute("PRAGMA synchronous=FULL")
    cursor.execute("PRAGMA foreign_keys=ON")
    cursor.execute("PRAGMA busy_timeout=10000")
    cursor.close()


def _settle_schema(connection: sa.Connection, place: str) -> None:
    """Make the tables in an empty database; refuse one that is not ours or is newer."""
    tables = set(sa.inspect(connection).get_table_names())
    if not tables:
        schema.metadata.create_all(connection)
        connection.execute(schema.meta.insert(), {"key": "schema", "value": str(schema.SCHEMA)})
        return
    if "meta" not in tables or "runs" not in tables:
        raise _bad(
            place,
            "tables " + ", ".join(sorted(tables))[:80],
            "a logbook's tables",
            "this database belongs to something else; name another file",
        )
    found = connection.execute(
        sa.select(schema.meta.c.value).where(schema.meta.c.key == "schema")
    ).scalar_one_or_none()
    if found != str(schema.SCHEMA):
        raise _bad(
            place,
            f"schema {found}",
            f"schema {schema.SCHEMA}",
            "use the version of Lodestroke that wrote it, or a newer one",
        )


def worded(place: str, fault: SQLAlchemyError) -> LogbookError:
    """A database error as one of ours."""
    text = str(fault.orig) if isinstance(fault, DBAPIError) else str(fault)
    advice = "look at the disk and the file's rights"
    for sign, hint in (
        ("full", "free some disk space; nothing already logged is lost"),
        ("locked", "end the program that holds it"),
        ("not a database", "this file is no logbook; name another"),
        ("malformed", "run lodestroke log verify, and restore a copy"),
        ("readonly", "give yourself the right to write, or name another file"),
        ("unable to open", "name a folder that exists and that you may write to"),
    ):
        if sign in text.lower():
            advice = hint
    return _bad(
        place,
        text.splitlines()[0] if text else type(fault).__name__,
        "a logbook that can be read and written",
        advice,
    )


def _bad(place: str, got: str, bound: str, try_: str) -> LogbookError:
    return LogbookError("the logbook cannot be used", at=place, got=got, bound=bound, try_=try_)
