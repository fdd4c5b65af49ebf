"""Opening a logbook: a SQLite file by default, any database that SQLAlchemy reaches by URL."""

from __future__ import annotations

import json
import math
import os
import time
import weakref
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import sqlalchemy as sa
from sqlalchemy import event
from sqlalchemy.exc import ArgumentError, NoSuchModuleError, OperationalError, SQLAlchemyError

from ..errors import LogbookError
from . import schema
from .faults import damaged, refused, worded

ENVIRONMENT = "LODESTROKE_LOGBOOK"
WAIT_S = 10.0  # for somebody else's transaction
_WRITES = "lodestroke_writes"


def default_path() -> Path:
    """The logbook in the user's data folder."""
    import platformdirs

    return Path(platformdirs.user_data_dir("lodestroke")) / "logbook.db"


class Logbook:
    """An open logbook: its engine and the name that users know it by (never with a password)."""

    def __init__(self, engine: sa.Engine, name: str) -> None:
        self.engine = engine
        self.name = name
        self._writing = engine.execution_options(**{_WRITES: True})
        weakref.finalize(self, engine.dispose)  # for those who let it go without close()

    @contextmanager
    def read(self) -> Iterator[sa.Connection]:
        """One consistent view of everything. Raises LogbookError for what the database says."""
        try:
            with self.engine.connect() as connection:
                yield connection
        except SQLAlchemyError as fault:
            raise worded(self.name, fault) from fault
        except (json.JSONDecodeError, UnicodeDecodeError) as fault:
            raise damaged(self.name, fault) from fault

    @contextmanager
    def write(self) -> Iterator[sa.Connection]:
        """One transaction: on disk when the block has been left, or nothing of it is.

        Raises LogbookError for what the database says.
        """
        try:
            with self._writing.begin() as connection:
                yield connection
        except SQLAlchemyError as fault:
            raise worded(self.name, fault) from fault
        except (json.JSONDecodeError, UnicodeDecodeError) as fault:
            raise damaged(self.name, fault) from fault

    def close(self) -> None:
        """Let go of the database."""
        self.engine.dispose()

    def __enter__(self) -> Logbook:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def open_logbook(
    where: str | Path | None = None, *, create: bool = True, wait_s: float = WAIT_S
) -> Logbook:
    """Open the logbook at a path or URL, or the one that environment or default name.

    create=False: a file that is not there is an error. wait_s: how long to wait for another writer.
    Raises LogbookError.
    """
    place = str(where or os.environ.get(ENVIRONMENT) or default_path())
    url = _url(place, create)
    name = place if "://" not in place else url.render_as_string(hide_password=True)
    engine = _engine(url, name, wait_s)
    try:
        _settle(engine, name, wait_s)
    except SQLAlchemyError as fault:
        engine.dispose()
        raise worded(name, fault) from fault
    except UnicodeDecodeError as fault:  # from a message that quotes the damaged text
        engine.dispose()
        raise damaged(name, fault) from fault
    except LogbookError:
        engine.dispose()
        raise
    return Logbook(engine, name)


def _url(place: str, create: bool) -> sa.URL:
    if "://" not in place:
        return sa.URL.create("sqlite", database=str(_file(place, Path(place).expanduser(), create)))
    try:
        url = sa.make_url(place)
    except (ArgumentError, ValueError) as fault:
        raise refused(
            place.split("://", maxsplit=1)[0] + "://…",
            "an address that cannot be read",
            "a path, or a database URL",
            "write it as postgresql://user@host/database",
        ) from fault
    if url.get_backend_name() == "sqlite":
        if url.database in (None, "", ":memory:"):
            raise refused(place, "a logbook in memory", "a logbook on a disk", "name a file")
        return url.set(database=str(_file(place, Path(url.database or ""), create)))
    if url.drivername == "postgresql":
        return url.set(drivername="postgresql+psycopg")  # one driver, whatever the default is
    return url


def _file(place: str, path: Path, create: bool) -> Path:
    """The path of a SQLite file, its folder made. Raises LogbookError."""
    try:
        if path.is_dir():
            raise refused(place, "a folder", "a file", f"name a file, {path / 'logbook.db'} say")
        if path.exists():
            return path
        if create:
            path.parent.mkdir(parents=True, exist_ok=True)
            return path
    except (OSError, ValueError) as fault:
        raise refused(
            place, str(fault), "a file in a folder that can be written", "name another"
        ) from fault
    raise refused(
        place,
        "no such file",
        "a logbook",
        "name it with --logbook, or make one by running something",
    )


def _engine(url: sa.URL, name: str, wait_s: float) -> sa.Engine:
    local = url.get_backend_name() == "sqlite"
    try:
        engine = sa.create_engine(
            url, connect_args={"timeout": wait_s} if local else {}, json_serializer=as_json
        )
    except NoSuchModuleError as fault:
        raise refused(
            name, str(fault), "sqlite, postgresql", "name a database that is known"
        ) from (fault)
    except ModuleNotFoundError as fault:
        package = "psycopg[binary]" if fault.name == "psycopg" else str(fault.name)
        raise refused(
            name, f"no driver: {fault.name}", "an installed driver", f"pip install '{package}'"
        ) from fault
    if local:
        event.listen(engine, "connect", _settings)
        event.listen(engine, "begin", _begin)
    return engine


def _settings(connection: Any, _record: Any) -> None:
    """Durable before acknowledged: a sync at each commit. Nothing here alters the file."""
    connection.isolation_level = None  # transactions begin where _begin says so
    cursor = connection.cursor()
    cursor.execute("PRAGMA synchronous=FULL")
    cursor.execute("PRAGMA foreign_keys=ON")
    cursor.close()


def _begin(connection: sa.Connection) -> None:
    """Writers take the lock at once: one that reads first and then writes could not wait for it."""
    writes = connection.get_execution_options().get(_WRITES)
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")


def _settle(engine: sa.Engine, name: str, wait_s: float) -> None:
    """Know the database for a logbook, or make an empty one into one."""
    with engine.connect() as connection:
        tables = set(sa.inspect(connection).get_table_names())
        if tables:
            _recognise(connection, tables, name)
    if engine.dialect.name == "sqlite":
        _write_ahead(engine, wait_s)
    if not tables:
        with engine.execution_options(**{_WRITES: True}).begin() as connection:
            if sa.inspect(connection).has_table("meta"):
                return  # somebody else was faster
            schema.metadata.create_all(connection)
            connection.execute(schema.meta.insert(), {"key": "schema", "value": str(schema.SCHEMA)})


def _recognise(connection: sa.Connection, tables: set[str], name: str) -> None:
    """Refuse a database that is not ours, or of another schema."""
    if not {"meta", "runs", "cycles", "chunks"} <= tables:
        raise refused(
            name,
            "tables " + ", ".join(sorted(tables))[:80],
            "a logbook's tables",
            "this database belongs to something else; name another one",
        )
    found = connection.execute(
        sa.select(schema.meta.c.value).where(schema.meta.c.key == "schema")
    ).scalar_one_or_none()
    if found != str(schema.SCHEMA):
        newer = str(found).isdigit() and int(str(found)) > schema.SCHEMA
        raise refused(
            name,
            f"schema {found}",
            f"schema {schema.SCHEMA}",
            "upgrade Lodestroke: a newer version wrote it"
            if newer
            else "use the version of Lodestroke that wrote it",
        )


def _write_ahead(engine: sa.Engine, wait_s: float) -> None:
    """WAL, once for the file: readers never wait. Two that set it at once get in each other's way."""
    end_s = time.monotonic() + wait_s
    while True:
        raw = engine.raw_connection()
        try:
            cursor = raw.cursor()
            cursor.execute("PRAGMA journal_mode=WAL")
            cursor.close()
            return
        except Exception as fault:
            if "locked" not in str(fault) or time.monotonic() > end_s:
                raise OperationalError("PRAGMA journal_mode=WAL", {}, fault) from fault
            time.sleep(0.02)
        finally:
            raw.close()


def as_json(value: Any, *, sort_keys: bool = False) -> str:
    """JSON that every database takes: numpy's numbers as numbers, what is not finite as null."""
    return json.dumps(_plain(value), sort_keys=sort_keys, allow_nan=False)


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return {str(key): _plain(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(entry) for entry in value]
    if hasattr(value, "tolist"):  # numpy, without importing it
        return _plain(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
