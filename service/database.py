"""Connections to the database: SQLite made durable, and the errors of any driver in our words."""

from __future__ import annotations

import sqlite3
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import sqlalchemy as sql
from sqlalchemy.engine import Connection

from service.run import StoreError, StoreFullError

_BEGIN = "BEGIN IMMEDIATE"
_PATIENCE = 10.0
"""Seconds for which a connection waits for the lock of another one."""


def open_database(url: str) -> sql.Engine:
    """The connections to a database; the directory of an SQLite file is made, readable by its owner only.

    Raises StoreError where the directory cannot be made.
    """
    if not url.startswith("sqlite"):
        return sql.create_engine(url, pool_pre_ping=True)
    if path := sql.make_url(url).database:
        try:
            Path(path).parent.mkdir(mode=0o700, parents=True, exist_ok=True)
        except OSError as error:
            raise StoreError(f"the directory {Path(path).parent} cannot be made: {error.strerror}") from error
    engine = sql.create_engine(url, connect_args={"check_same_thread": False, "timeout": _PATIENCE}, paramstyle="named")

    @sql.event.listens_for(engine, "connect")
    def _configure(connection: Any, _: Any) -> None:
        connection.isolation_level = None  # the driver must not begin transactions behind our back
        _write_ahead(connection)
        connection.execute("PRAGMA synchronous = FULL")
        connection.execute("PRAGMA foreign_keys = ON")

    @sql.event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        # Take the write lock first: a read lock that turns into one fails where two do it at once.
        if not connection.get_execution_options().get("reads_only"):
            connection.exec_driver_sql(_BEGIN)

    return engine


def _write_ahead(connection: sqlite3.Connection) -> None:
    """Keep a write-ahead log; only this switch does not wait by itself for another connection that makes it too."""
    last = time.monotonic() + _PATIENCE
    while True:
        try:
            connection.execute("PRAGMA journal_mode = WAL")
            return
        except sqlite3.OperationalError:
            if time.monotonic() > last:
                raise
            time.sleep(0.01)


def text_of(engine: sql.Engine, statement: sql.Executable, *columns: str) -> str:
    """A statement as the driver takes it, parameters by name; `columns` are what an insert or update sets."""
    assert isinstance(statement, sql.ClauseElement)
    return str(statement.compile(dialect=engine.dialect, column_keys=columns or None))


@contextmanager
def bare_cursor(engine: sql.Engine) -> Iterator[Any]:
    """A cursor of the driver in a transaction that is on disk when the block is left.

    For what every run waits for: SQLAlchemy needs three times as long to pass a statement on as SQLite to carry it out.
    """
    connection = engine.raw_connection()
    try:
        cursor = connection.cursor()
        if engine.dialect.name == "sqlite":
            cursor.execute(_BEGIN)
        yield cursor
        connection.commit()
    except engine.dialect.loaded_dbapi.Error as error:
        raise sql.exc.DBAPIError.instance(None, None, error, engine.dialect.loaded_dbapi.Error) from error
    finally:
        connection.close()  # rolls back what is not committed


@contextmanager
def translated() -> Iterator[None]:
    """Turn what the database driver raises into the errors of `service.run`."""
    try:
        yield
    except sql.exc.IntegrityError:
        raise
    except sql.exc.DBAPIError as error:
        full = getattr(error.orig, "sqlite_errorcode", None) == sqlite3.SQLITE_FULL
        full = full or getattr(error.orig, "sqlstate", None) == "53100"  # PostgreSQL: disk_full
        raise (StoreFullError if full else StoreError)(str(error.orig)) from error
    except sql.exc.TimeoutError as error:
        raise StoreError("all connections are in use") from error
