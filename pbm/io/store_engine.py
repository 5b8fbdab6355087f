"""Which database a store is, and how it is opened: to write, by one; to read, by any number."""

import sqlite3
from pathlib import Path
from typing import Any
from urllib.parse import quote

from sqlalchemy import URL, Connection, Engine, create_engine, event
from sqlalchemy.pool import NullPool, StaticPool

LOCK_SECONDS = 10.0


def writing_engine(path: Path) -> Engine:
    """SQLite with a write-ahead log, every commit on the disk, every transaction begun IMMEDIATE; one connection."""
    place = URL.create("sqlite", database=str(path))
    engine = create_engine(
        place, poolclass=StaticPool, connect_args={"timeout": LOCK_SECONDS, "check_same_thread": False}
    )

    @event.listens_for(engine, "connect")
    def set_up(connection: Any, _: Any) -> None:
        # None: the driver opens no transaction of its own, so that BEGIN IMMEDIATE below is the only one.
        connection.isolation_level = None
        connection.execute("PRAGMA journal_mode = WAL")
        connection.execute("PRAGMA synchronous = FULL")

    @event.listens_for(engine, "begin")
    def begin(connection: Connection) -> None:
        connection.exec_driver_sql("BEGIN IMMEDIATE")

    return engine


def reading_engine(path: Path) -> Engine:
    """The same file read-only; a connection lives no longer than one question."""
    place = f"file:{quote(str(path.absolute()))}?mode=ro"
    return create_engine("sqlite://", creator=lambda: sqlite3.connect(place, uri=True), poolclass=NullPool)
