"""Which database a store is, and how it is opened: to write, by one; to read, by any number.

SQLite: a write-ahead log, every commit on the disk, every transaction begun IMMEDIATE; readers open the file read-only. PostgreSQL: the
tables stand in the schema `watch`, and every commit waits for the server's disk.
"""

import logging
import os
import sqlite3
from pathlib import Path
from typing import Any
from urllib.parse import quote

from sqlalchemy import URL, Connection, Engine, create_engine, event
from sqlalchemy.pool import NullPool, StaticPool

from pbm.errors import FeedError
from pbm.io.store_place import Place, in_words
from pbm.io.store_prepared import driver_cursor
from pbm.io.writer_lock import hold_advisory_lock

LOCK_SECONDS = 10.0
OLDEST_SQLITE = (3, 32, 0)  # questions about a batch name more than 999 specimens at once
OLDEST_POSTGRESQL = 130_000
SCHEMA = "watch"


def writing_engine(place: Place) -> Engine:
    """The database opened to write, over one connection.

    Raises
    ------
    FeedError
        If its library is missing or too old; when it connects, if the server is too old or another process writes.
    """
    return _sqlite(place) if isinstance(place, Path) else _postgresql(place, to_write=True)


def reading_engine(place: Place) -> Engine:
    """The same database read-only; a connection lives no longer than one question."""
    if isinstance(place, URL):
        return _postgresql(place, to_write=False)
    return create_engine("sqlite://", creator=lambda: _connect_to_read(place), poolclass=NullPool)


def _connect_to_read(path: Path) -> sqlite3.Connection:
    log = path.with_name(f"{path.name}-wal")
    # A copy put away on a medium that cannot be written: nobody writes it, and there is no room for the files of a log.
    put_away = "" if log.exists() or _may_write(path.parent) else "&immutable=1"
    return sqlite3.connect(f"file:{quote(str(path.absolute()))}?mode=ro{put_away}", uri=True)


def _may_write(folder: Path) -> bool:
    return os.access(folder, os.W_OK, effective_ids=os.access in os.supports_effective_ids)


def _sqlite(path: Path) -> Engine:
    if sqlite3.sqlite_version_info < OLDEST_SQLITE:
        wanted = ".".join(map(str, OLDEST_SQLITE))
        raise FeedError(
            f"This Python works with SQLite {sqlite3.sqlite_version}, and the store needs {wanted} or later. Use a later Python."
        )
    place = URL.create("sqlite", database=str(path))
    engine = create_engine(
        place, poolclass=StaticPool, connect_args={"timeout": LOCK_SECONDS, "check_same_thread": False}
    )

    @event.listens_for(engine, "connect")
    def set_up(connection: Any, _: Any) -> None:
        # None: the driver opens no transaction of its own, so that BEGIN IMMEDIATE below is the only one.
        connection.isolation_level = None
        # Only before the first table; it lets a store give back the room of what is removed.
        connection.execute("PRAGMA auto_vacuum = INCREMENTAL")
        connection.execute("PRAGMA journal_mode = WAL")
        connection.execute("PRAGMA synchronous = FULL")

    @event.listens_for(engine, "begin")
    def begin(connection: Connection) -> None:
        with driver_cursor(connection) as cursor:
            cursor.execute("BEGIN IMMEDIATE")

    return engine


def _postgresql(place: URL, *, to_write: bool) -> Engine:
    try:
        engine = create_engine(
            place,
            poolclass=StaticPool if to_write else NullPool,
            connect_args={"connect_timeout": int(LOCK_SECONDS), "application_name": f"process {os.getpid()}"},
        )
    except ImportError:
        raise FeedError(
            f"The store {in_words(place)} is a PostgreSQL database, and psycopg is not installed. Install it: pip install 'pbm[postgres]'."
        ) from None

    # It warns of what it raises as well; what is raised is told.
    logging.getLogger("psycopg").addHandler(logging.NullHandler())

    @event.listens_for(engine, "connect")
    def set_up(connection: Any, _: Any) -> None:
        try:
            _prepare_session(connection, place, to_write=to_write)
        except BaseException:
            connection.close()
            raise

    return engine


def _prepare_session(connection: Any, place: URL, *, to_write: bool) -> None:
    _check_server(connection, place)
    connection.execute(f"SET search_path TO {SCHEMA}")
    connection.execute(f"SET lock_timeout TO '{LOCK_SECONDS}s'")
    if to_write:
        connection.execute("SET synchronous_commit TO on")
        hold_advisory_lock(connection, in_words(place))
        # Asked for first: to create it may be forbidden even where it is there.
        if connection.execute("SELECT 1 FROM pg_namespace WHERE nspname = %s", [SCHEMA]).fetchone() is None:
            connection.execute(f"CREATE SCHEMA {SCHEMA}")
    else:
        connection.execute("SET default_transaction_read_only TO on")
    connection.commit()


def _check_server(connection: Any, place: URL) -> None:
    if connection.info.server_version < OLDEST_POSTGRESQL:
        raise FeedError(
            f"The server of {in_words(place)} is PostgreSQL {connection.info.server_version // 10_000}, and the store needs "
            f"{OLDEST_POSTGRESQL // 10_000} or later."
        )
    if connection.execute("SHOW fsync").fetchone()[0] != "on":
        raise FeedError(
            f"The server of {in_words(place)} runs with fsync = off: it would lose what was acknowledged when the power fails. Switch "
            "fsync on."
        )
