"""A store that an earlier version made is brought forward with all that it holds, and is then like one made today."""

import json
import sqlite3
from pathlib import Path
from typing import Any

import pytest

from pbm.errors import FeedError
from pbm.io import store_audit
from pbm.io.store import Store
from pbm.io.store_migrations import MIGRATIONS
from pbm.io.store_reader import StoreReader
from pbm.io.store_schema import SCHEMA_VERSION
from pbm.records.alarm import Alarm
from pbm.records.snapshot import Snapshot
from tests.live_laboratory import SODIUM, START, results

# As the first version made it, word for word.
LAYOUT_1 = """
CREATE TABLE schema (version INTEGER NOT NULL, PRIMARY KEY (version));
CREATE TABLE streams (id INTEGER NOT NULL, analyte VARCHAR NOT NULL, analyser VARCHAR NOT NULL, newest VARCHAR NOT NULL, PRIMARY KEY (id),
    UNIQUE (analyte, analyser));
CREATE TABLE feeds (id INTEGER NOT NULL, source VARCHAR NOT NULL, position VARCHAR NOT NULL, PRIMARY KEY (id), UNIQUE (source));
CREATE TABLE tallies (reason VARCHAR NOT NULL, count BIGINT NOT NULL, PRIMARY KEY (reason));
CREATE TABLE audit (id INTEGER NOT NULL, at BIGINT NOT NULL, what VARCHAR NOT NULL, plan_before VARCHAR NOT NULL,
    plan_after VARCHAR NOT NULL, detail VARCHAR NOT NULL, PRIMARY KEY (id));
CREATE TABLE results (seq INTEGER NOT NULL, stream INTEGER NOT NULL, specimen VARCHAR NOT NULL, time BIGINT NOT NULL, value FLOAT NOT NULL,
    censor SMALLINT NOT NULL, ward VARCHAR NOT NULL, patient VARCHAR NOT NULL, left_out VARCHAR NOT NULL, feed INTEGER NOT NULL,
    edition INTEGER NOT NULL, PRIMARY KEY (seq), FOREIGN KEY(stream) REFERENCES streams (id), FOREIGN KEY(feed) REFERENCES feeds (id));
CREATE INDEX results_without_specimen ON results (time) WHERE specimen = '';
CREATE UNIQUE INDEX one_result_once ON results (specimen, stream, time, value, censor) WHERE specimen != '';
CREATE INDEX results_of_a_patient ON results (patient) WHERE patient != '';
CREATE INDEX results_of_a_stream ON results (stream, seq);
CREATE TABLE monitors (stream INTEGER NOT NULL, monitor INTEGER NOT NULL, settings VARCHAR NOT NULL, state BLOB NOT NULL,
    taken BIGINT NOT NULL, admitted BIGINT NOT NULL, needed INTEGER NOT NULL, value FLOAT, episode SMALLINT NOT NULL,
    PRIMARY KEY (stream, monitor), FOREIGN KEY(stream) REFERENCES streams (id));
CREATE TABLE set_aside (id INTEGER NOT NULL, feed INTEGER NOT NULL, place BIGINT NOT NULL, reason VARCHAR NOT NULL,
    found VARCHAR NOT NULL, stream VARCHAR NOT NULL, PRIMARY KEY (id), FOREIGN KEY(feed) REFERENCES feeds (id));
CREATE TABLE alarms (id INTEGER NOT NULL, stream INTEGER NOT NULL, monitor INTEGER NOT NULL, seq INTEGER NOT NULL, time BIGINT NOT NULL,
    specimen VARCHAR NOT NULL, side VARCHAR NOT NULL, statistic VARCHAR NOT NULL, value FLOAT NOT NULL, control_limit FLOAT NOT NULL,
    shown FLOAT NOT NULL, shown_limit FLOAT NOT NULL, onset BIGINT, onset_low BIGINT, onset_high BIGINT, results INTEGER, size FLOAT,
    size_in_tea FLOAT, expected_unreliable FLOAT, last_control BIGINT, plan_sha256 VARCHAR NOT NULL, PRIMARY KEY (id),
    UNIQUE (stream, monitor, seq), FOREIGN KEY(stream) REFERENCES streams (id), FOREIGN KEY(seq) REFERENCES results (seq));
"""
STATE = b"state"


@pytest.fixture
def old(tmp_path: Path) -> Path:
    """A store of layout 1 with something in every table."""
    path = tmp_path / "watch.sqlite"
    with sqlite3.connect(path) as connection:
        connection.executescript(LAYOUT_1)
        put = connection.execute
        put("insert into schema values (1)")
        put("insert into streams values (1, 'sodium', 'line-1', ?)", [json.dumps([START, START + 1])])
        put("insert into feeds values (1, 'live.csv', '17')")
        for seq, one in enumerate(results([140, 141, 152]), 1):
            given = (seq, 1, one.specimen, one.time, one.value, one.censor, one.ward, "token", "", 1, 1)
            put(f"insert into results values ({', '.join('?' * len(given))})", given)
        put("insert into monitors values (1, 0, 'settings', ?, 3, 3, 0, 141.6, 1)", [STATE])
        put("insert into set_aside values (1, 1, 9, 'not a number', 'HEM', 'sodium@line-1')")
        put("insert into tallies values ('not a number', 1), ('duplicate', 2)")
        alarm = (1, 1, 0, 3, START, "31-3", "HIGH", "ewma", 141.6, 141.3, 141.6, 141.3, *[None] * 8, "sha")
        put(f"insert into alarms values ({', '.join('?' * len(alarm))})", alarm)
        put("insert into audit values (1, 5, 'watch begun', '', 'old', '1'), (2, 6, 'watch begun', 'old', 'sha', '')")
    return path


def test_a_store_of_the_first_layout_keeps_everything(old: Path) -> None:
    with Store(old) as store:
        assert store.recent_results(SODIUM, 9) == [
            type(one)(one.time, one.stream, one.value, one.censor, one.specimen, one.ward, "token")
            for one in results([140, 141, 152])
        ]
        assert store.position("live.csv") == "17"
        assert store.newest_times() == {SODIUM: [START, START + 1]}
        assert store.snapshots() == [Snapshot(SODIUM, 0, "settings", STATE, 3, 3, 0, 141.6, 1)]
        assert store.plan_in_force() == "sha"
    alarm = Alarm(SODIUM, 0, START, "31-3", "HIGH", "ewma", 141.6, 141.3, 141.6, 141.3, None, None, "sha", shadow=False)
    assert StoreReader(old).alarms() == [alarm]


def test_the_audit_of_an_older_store_is_chained_and_says_that_it_was_brought_forward(old: Path) -> None:
    Store(old).close()
    with sqlite3.connect(old) as connection:
        entries = connection.execute("select what, detail, hash from audit order by id").fetchall()
        head = connection.execute("select * from audit_head").fetchall()
    assert [one[0] for one in entries] == ["watch begun", "watch begun", "store migrated"]
    assert entries[-1][1] == f"layout 1 to layout {SCHEMA_VERSION}"
    first = {"id": 1, "at": 5, "what": "watch begun", "plan_before": "", "plan_after": "old", "detail": "1"}
    assert entries[0][2] == store_audit.entry_hash("", first)
    assert head == [(3, entries[-1][2])]


def test_what_feeds_delivered_is_made_up_from_what_an_older_store_holds(old: Path) -> None:
    Store(old).close()
    with sqlite3.connect(old) as connection:
        assert connection.execute("select delivered, removed from feeds").fetchall() == [(3 + 1 + 2, 0)]


def test_a_migrated_store_has_the_tables_of_a_new_one(old: Path, tmp_path: Path) -> None:
    new = tmp_path / "new.sqlite"
    Store(old).close()
    Store(new).close()
    assert layout(old) == layout(new)


def layout(path: Path) -> dict[str, Any]:
    """Tables with their columns, keys and indexes, and the text of triggers; defaults, which only the migration needs, left out."""
    with sqlite3.connect(path) as connection:
        ask = connection.execute
        names = [row[0] for row in ask("select name from sqlite_master where type = 'table' order by name")]
        return {
            name: (
                [(row[1], row[2], row[3], row[5]) for row in ask(f"pragma table_info({name})")],
                sorted(ask(f"pragma foreign_key_list({name})").fetchall()),
                sorted((row[1], row[2], row[4]) for row in ask(f"pragma index_list({name})")),
            )
            for name in names
        } | dict(ask("select name, sql from sqlite_master where type in ('index', 'trigger') and sql is not null"))


def test_every_layout_since_the_first_has_a_migration() -> None:
    assert sorted(MIGRATIONS) == list(range(1, SCHEMA_VERSION))


def test_a_migration_that_fails_leaves_the_store_as_it_was(old: Path) -> None:
    with sqlite3.connect(old) as connection:
        connection.execute("create table notices (mine)")
    with pytest.raises(FeedError, match="cannot go on"):
        Store(old)
    with sqlite3.connect(old) as connection:
        assert connection.execute("select version from schema").fetchall() == [(1,)]
        assert connection.execute("select count(*) from audit").fetchone() == (2,)
        assert "shadow" not in [row[1] for row in connection.execute("pragma table_info(alarms)")]


def test_a_reader_of_an_older_store_is_told_who_brings_it_forward(old: Path) -> None:
    with pytest.raises(FeedError, match="`pbm watch` brings it forward"):
        StoreReader(old)
