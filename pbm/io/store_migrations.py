"""Numbered migrations: a store that an earlier version of pbm made is brought forward, a layout at a time, with all that it holds.

Each is written in the SQL of its day and never changed afterwards: what it makes must not follow a later change of the tables. All steps
and the new number are one transaction. Stores of layout 1 are SQLite only.
"""

import time
from collections.abc import Callable, Mapping

from sqlalchemy import Connection, select, text, update

from pbm.errors import FeedError
from pbm.io import store_audit
from pbm.io.store_place import Place, in_words
from pbm.io.store_schema import SCHEMA_VERSION, schema


def migrate(connection: Connection, place: Place) -> None:
    """Bring the store to the layout of this version, in the transaction of the caller.

    Raises
    ------
    FeedError
        If a later version of pbm wrote it.
    """
    found = int(connection.execute(select(schema.c.version)).scalar_one())
    if found > SCHEMA_VERSION:
        raise newer(place, found)
    for version in range(found, SCHEMA_VERSION):
        MIGRATIONS[version](connection)
    if found < SCHEMA_VERSION:
        connection.execute(update(schema).values(version=SCHEMA_VERSION))
        store_audit.append(
            connection, time.time_ns() // 1_000, "store migrated", f"layout {found} to layout {SCHEMA_VERSION}"
        )


def check_version(connection: Connection, place: Place) -> None:
    """Refuse to read a store of another layout.

    Raises
    ------
    FeedError
        If the layout is not the one this version writes.
    """
    found = int(connection.execute(select(schema.c.version)).scalar_one())
    if found > SCHEMA_VERSION:
        raise newer(place, found)
    if found < SCHEMA_VERSION:
        raise FeedError(
            f"The store {in_words(place)} has layout {found}, and this version of pbm reads layout {SCHEMA_VERSION}. `pbm watch` brings "
            "it forward, with all that it holds, when it is started the next time."
        )


def newer(place: Place, found: int) -> FeedError:
    """The error for a store of a later version."""
    return FeedError(
        f"The store {in_words(place)} has layout {found}, and this version of pbm knows layouts up to {SCHEMA_VERSION}. A later version "
        "wrote it: use that version, or move the store away to start afresh."
    )


def _to_2(connection: Connection) -> None:
    """Laboratory events, notices, messages, annotations, a heartbeat; sex and age; a chained audit; what feeds delivered."""
    for statement in _TO_2.split(";\n"):
        connection.execute(text(statement))
    entries = connection.execute(text("SELECT id, at, what, plan_before, plan_after, detail FROM audit_1 ORDER BY id"))
    before, chained = store_audit.FIRST, []
    for row in entries.mappings():
        before = store_audit.entry_hash(before, dict(row))
        chained.append({**row, "hash": before})
    if chained:
        connection.execute(
            text("INSERT INTO audit VALUES (:id, :at, :what, :plan_before, :plan_after, :detail, :hash)"), chained
        )
        connection.execute(text("INSERT INTO audit_head VALUES (:id, :hash)"), chained[-1:])
    connection.execute(text("DROP TABLE audit_1"))


_TO_2 = """\
ALTER TABLE results ADD COLUMN sex VARCHAR NOT NULL DEFAULT '';
ALTER TABLE results ADD COLUMN age VARCHAR NOT NULL DEFAULT '';
ALTER TABLE alarms ADD COLUMN shadow BOOLEAN NOT NULL DEFAULT 0;
ALTER TABLE alarms ADD COLUMN last_control_passed BOOLEAN;
CREATE INDEX alarms_of_a_result ON alarms (seq);
ALTER TABLE feeds ADD COLUMN delivered BIGINT NOT NULL DEFAULT 0;
ALTER TABLE feeds ADD COLUMN removed BIGINT NOT NULL DEFAULT 0;
UPDATE feeds SET delivered = (SELECT count(*) FROM results WHERE feed = feeds.id) + (SELECT count(*) FROM set_aside WHERE feed = feeds.id);
UPDATE feeds SET delivered = delivered + (SELECT coalesce(sum(count), 0) FROM tallies WHERE reason = 'duplicate') WHERE id = 1;
ALTER TABLE audit RENAME TO audit_1;
CREATE TABLE audit (
    id INTEGER NOT NULL, at BIGINT NOT NULL, what VARCHAR NOT NULL, plan_before VARCHAR NOT NULL, plan_after VARCHAR NOT NULL,
    detail VARCHAR NOT NULL, hash VARCHAR NOT NULL, PRIMARY KEY (id));
CREATE TRIGGER audit_is_never_changed BEFORE UPDATE ON audit BEGIN SELECT RAISE(ABORT, 'the audit is never changed'); END;
CREATE TRIGGER audit_is_never_cut BEFORE DELETE ON audit BEGIN SELECT RAISE(ABORT, 'the audit is never changed'); END;
CREATE TABLE audit_head (entries INTEGER NOT NULL, hash VARCHAR NOT NULL, PRIMARY KEY (entries));
CREATE TABLE messages (
    sender VARCHAR NOT NULL, control_id VARCHAR NOT NULL, sha256 BLOB NOT NULL, code VARCHAR NOT NULL, at BIGINT NOT NULL,
    seq BIGINT NOT NULL, PRIMARY KEY (sender, control_id, sha256)) WITHOUT ROWID;
CREATE TABLE annotations (
    id INTEGER NOT NULL, stream INTEGER NOT NULL, specimen VARCHAR NOT NULL, time BIGINT NOT NULL, status VARCHAR NOT NULL,
    value VARCHAR NOT NULL, at BIGINT NOT NULL, feed INTEGER NOT NULL, place BIGINT NOT NULL, PRIMARY KEY (id),
    FOREIGN KEY(stream) REFERENCES streams (id), FOREIGN KEY(feed) REFERENCES feeds (id));
CREATE INDEX annotations_of_a_specimen ON annotations (specimen);
CREATE TABLE events (
    id INTEGER NOT NULL, time BIGINT NOT NULL, kind VARCHAR NOT NULL, analyte VARCHAR NOT NULL, analyser VARCHAR NOT NULL,
    detail VARCHAR NOT NULL, source VARCHAR NOT NULL, at BIGINT NOT NULL, seq BIGINT NOT NULL, effect VARCHAR NOT NULL,
    PRIMARY KEY (id));
CREATE TABLE notices (
    id INTEGER NOT NULL, time BIGINT NOT NULL, kind VARCHAR NOT NULL, analyte VARCHAR NOT NULL, analyser VARCHAR NOT NULL,
    text VARCHAR NOT NULL, closed_at BIGINT, PRIMARY KEY (id), UNIQUE (time, kind, analyte, analyser));
CREATE TABLE heartbeat (
    started BIGINT NOT NULL, at BIGINT NOT NULL, pid INTEGER NOT NULL, last_result BIGINT, last_arrival BIGINT,
    state VARCHAR NOT NULL, PRIMARY KEY (started))"""

MIGRATIONS: Mapping[int, Callable[[Connection], None]] = {1: _to_2}
