"""The store: all of a batch or nothing, one writer, readers beside it, and what it says when it cannot go on."""

import os
import shutil
import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any
from unittest.mock import ANY

import pytest
from sqlalchemy import event, text
from sqlalchemy.exc import OperationalError

from pbm.errors import FeedError, InputError
from pbm.io.store import Store
from pbm.io.store_reader import StoreReader
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.event import LabEvent
from pbm.records.message import Annotation, Answered, MessageKey
from pbm.records.notice import Heartbeat, Notice
from pbm.records.reading import SetAside
from pbm.records.snapshot import LATE, REPEAT, RERUN, Batch, Edition, KeptResult, Snapshot
from tests.live_laboratory import MINUTE, SODIUM, SODIUM_2, START, results

FEED = Edition("live.csv", 1)
ESTIMATE = OnsetEstimate(5, 1, 9, 41, 2.1, 0.525, 3.2)
ALARM = Alarm(SODIUM, 0, 7, "31-1", "HIGH", "ewma", 141.6, 141.3, 141.6, 141.3, ESTIMATE, 3, "sha")
SNAPSHOT = Snapshot(SODIUM, 0, "settings", b"state", 10, 9, 0, 141.6, 1)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "watch.sqlite"


def batch(**changed: Any) -> Batch:
    given: dict[str, Any] = {
        "results": [KeptResult(one, "", FEED) for one in results([140, 141, 142])],
        "alarms": [(2, ALARM)],
        "snapshots": [SNAPSHOT],
        "newest": {SODIUM: [1, 2, 3]},
        "set_aside": [("live.csv", SetAside(4, "not a number", "HEM", "sodium@line-1"))],
        "tallies": {"not a number": 1},
        "positions": {"live.csv": "17"},
    }
    return Batch(**(given | changed))


def begun(path: Path) -> Store:
    store = Store(path)
    store.begin(1, "watch begun", "sha", "", [replace(SNAPSHOT, state=b"", taken=0, episode=0)])
    return store


def tables(path: Path) -> dict[str, list[tuple[Any, ...]]]:
    with sqlite3.connect(path) as connection:
        names = [row[0] for row in connection.execute("select name from sqlite_master where type = 'table'")]
        return {name: sorted(connection.execute(f"select * from {name}"), key=_by_columns) for name in names}


def _by_columns(row: tuple[Any, ...]) -> list[Any]:
    return [(value is None, value) for value in row]


def test_what_was_kept_is_there_when_the_store_is_opened_again(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch())
    with Store(path) as store:
        assert store.position("live.csv") == "17"
        assert store.snapshots() == [SNAPSHOT]
        assert store.recent_results(SODIUM, 2) == results([140, 141, 142])[1:]
        assert store.newest_times() == {SODIUM: [1, 2, 3]}
        assert store.open_alarms() == [ALARM]
        assert store.plan_in_force() == "sha"


def test_numbers_come_back_to_the_last_bit(path: Path) -> None:
    odd = [0.1 + 0.2, 1e-300, 138.00000000000003, -1.5e9]
    with begun(path) as store:
        store.keep(batch(results=[KeptResult(one, "", FEED) for one in results(odd)], alarms=[]))
        assert [one.value.hex() for one in store.recent_results(SODIUM, 9)] == [value.hex() for value in odd]


def test_an_alarm_without_estimate_or_control_comes_back_as_it_was(path: Path) -> None:
    bare = replace(ALARM, estimate=None, last_control=None)
    with begun(path) as store:
        store.keep(batch(alarms=[(0, bare)]))
        assert store.open_alarms() == [bare]


def test_a_batch_that_fails_leaves_nothing_and_can_be_tried_again(path: Path) -> None:
    with begun(path) as store:
        before = tables(path)
        broken = batch(results=[KeptResult(one, "", FEED) for one in [*results([140]), *results([140])]])
        with pytest.raises(FeedError, match="cannot go on"):
            store.keep(broken)
        assert tables(path) == before
        store.keep(batch())
        assert len(tables(path)["results"]) == 3


def test_results_are_numbered_in_order_of_arrival(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch())
        store.keep(
            batch(results=[KeptResult(one, "", FEED) for one in results([1, 2], first=50)], alarms=[], set_aside=[])
        )
    assert [row[0] for row in tables(path)["results"]] == [1, 2, 3, 4, 5]


def test_tallies_add_up(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch())
        store.keep(batch(results=[], alarms=[], tallies={"not a number": 2, "duplicate": 5}))
    assert tables(path)["tallies"] == [("duplicate", 5), ("not a number", 3)]


def test_earlier_runs_of_a_specimen_are_found_in_every_stream(path: Path) -> None:
    one, other, third = results([140, 141, 142])
    kept = [
        KeptResult(one, "", FEED),
        KeptResult(other, RERUN, FEED),
        KeptResult(replace(one, stream=SODIUM_2), "", FEED),
    ]
    with begun(path) as store:
        store.keep(batch(results=kept, alarms=[]))
        found = store.earlier([replace(one, value=150.0), other, third])
    assert found.runs == {
        (SODIUM, one.specimen): {(one.time, 140.0, 0): True},
        (SODIUM_2, one.specimen): {(one.time, 140.0, 0): True},
        (SODIUM, other.specimen): {(other.time, 141.0, 0): False},
    }


def test_results_without_a_specimen_are_found_by_their_time_with_their_editions(path: Path) -> None:
    bare = replace(results([140])[0], specimen="")
    again = Edition("live.csv", 2)
    with begun(path) as store:
        store.keep(
            batch(
                results=[KeptResult(bare, "", FEED), KeptResult(bare, "", FEED), KeptResult(bare, "", again)], alarms=[]
            )
        )
        found = store.earlier([bare, replace(bare, time=bare.time + 1)])
    assert found.unnamed == {(SODIUM, bare.time, 140.0, 0): {FEED, again}}
    assert not found.runs


def test_earlier_visits_of_a_patient_are_found_but_not_those_that_do_not_count(path: Path) -> None:
    some = [replace(one, patient="token") for one in results([140, 141, 142])]
    kept = [KeptResult(one, left_out, FEED) for one, left_out in zip(some, ("", REPEAT, LATE), strict=True)]
    with begun(path) as store:
        store.keep(batch(results=kept, alarms=[]))
        found = store.earlier(
            [replace(some[0], specimen="31-new"), replace(some[1], specimen="31-other", patient="another")]
        )
    assert found.visits == {(SODIUM, "token"): [some[0].time, some[2].time]}


@pytest.mark.parametrize(
    "question",
    [
        "specimen <> '' AND specimen IN ('a', 'b')",
        "specimen = '' AND time IN (1, 2)",
        "patient <> '' AND patient IN ('a', 'b')",
    ],
)
def test_looking_for_earlier_results_never_reads_the_whole_table(path: Path, question: str) -> None:
    with begun(path) as store:
        store.keep(batch())
    with sqlite3.connect(path) as connection:
        steps = [row[3] for row in connection.execute(f"explain query plan select * from results where {question}")]
    assert any("SEARCH" in step for step in steps) and not any("SCAN" in step for step in steps)


def test_a_plan_that_takes_over_puts_its_monitors_in_place_and_leaves_a_mark(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch())
        store.begin(
            99, "watch begun", "other", "1 monitors go on", [SNAPSHOT, replace(SNAPSHOT, monitor=1, value=float("nan"))]
        )
        assert [one.monitor for one in store.snapshots()] == [0, 1]
    assert tables(path)["audit"] == [
        (1, 1, "watch begun", "", "sha", "", ANY),
        (2, 99, "watch begun", "sha", "other", "1 monitors go on", ANY),
    ]


def test_an_alarm_is_open_until_its_episode_closes(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch())
        store.keep(batch(results=results_kept(50), alarms=[(0, replace(ALARM, time=8))], set_aside=[]))
        assert [one.time for one in store.open_alarms()] == [8]
        store.keep(batch(results=[], alarms=[], snapshots=[replace(SNAPSHOT, episode=0)]))
        assert store.open_alarms() == []


def results_kept(first: int) -> list[KeptResult]:
    return [KeptResult(one, "", FEED) for one in results([140, 141], first=first)]


# What comes beside results

KEY = MessageKey("LIS^TERN BAY", "000123", "ab" * 32)
EVENT = LabEvent(START, "reagent lot", "sodium", "line-1", "R-2031-07", "events.ndjson", START + 5, "level re-learned")
NOTICE = Notice(START, "quiet", "sodium", "line-2", "line-2 quiet for 45 min, 20 expected")
ANNOTATION = Annotation(SODIUM, "31-1", START, "C", "141", START + 9, "live.csv", 7)
BEAT = Heartbeat(START, START + 1, 42, None, None)


def test_a_message_is_answered_once_the_batch_that_holds_it_is_kept(path: Path) -> None:
    other = KEY._replace(sha256="cd" * 32)
    with begun(path) as store:
        assert store.answered([KEY]) == {}
        store.keep(batch(messages=[Answered(KEY, "AA", 5)]))
        assert store.answered([KEY, other, KEY._replace(sender="another")]) == {KEY: "AA"}
        with pytest.raises(FeedError):
            store.keep(batch(results=results_kept(90), alarms=[], set_aside=[], messages=[Answered(KEY, "AA", 6)]))
        assert len(store.recent_results(SODIUM, 99)) == 3
    assert tables(path)["messages"] == [("LIS^TERN BAY", "000123", bytes.fromhex("ab" * 32), "AA", 5, 3)]


def test_annotations_events_and_notices_come_back_as_they_were(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch(annotations=[ANNOTATION], events=[(1, EVENT)], notices=[NOTICE]))
        assert store.events() == [EVENT] and store.open_notices() == [NOTICE]
    reader = StoreReader(path)
    assert (reader.annotations(), reader.events(), reader.notices()) == ([ANNOTATION], [EVENT], [NOTICE])
    assert [row[8] for row in tables(path)["events"]] == [1], "after the first result of the batch"
    assert reader.recent_results(SODIUM, 1)[0].value == 142, "a later word never rewrites a result"


def test_a_notice_ends_under_the_name_with_which_it_began(path: Path) -> None:
    ended = replace(NOTICE, text="line-2 was quiet for 50 min", closed_at=START + MINUTE)
    with begun(path) as store:
        store.keep(Batch(notices=[NOTICE]))
        store.keep(Batch(notices=[ended, replace(NOTICE, analyser="line-1")]))
        assert store.open_notices() == [replace(NOTICE, analyser="line-1")]
    assert StoreReader(path).notices() == [ended, replace(NOTICE, analyser="line-1")]


def test_a_laboratory_event_leaves_a_mark_in_the_audit(path: Path) -> None:
    with begun(path) as store:
        store.keep(Batch(events=[(0, EVENT)]))
    told = "sodium@line-1; R-2031-07; events.ndjson; level re-learned"
    assert tables(path)["audit"][-1][1:-1] == (START + 5, "reagent lot", "sha", "sha", told)


def test_the_last_sign_of_life_is_kept(path: Path) -> None:
    with begun(path) as store:
        assert StoreReader(path).heartbeat() is None
        store.beat(BEAT)
        store.beat(replace(BEAT, at=START + 9, last_result=START, last_arrival=START + 2, state='{"armed": 3}'))
    assert StoreReader(path).heartbeat() == Heartbeat(START, START + 9, 42, START, START + 2, '{"armed": 3}')
    assert len(tables(path)["heartbeat"]) == 1


def test_what_a_feed_delivered_adds_up(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch(delivered={"live.csv": 4}))
        store.keep(Batch(positions={"live.csv": "30", "-": ""}, delivered={"live.csv": 2}))
    assert [row[1:] for row in tables(path)["feeds"]] == [("live.csv", "30", 6, 0), ("-", "", 0, 0)]


# One writer, many readers


def test_a_second_writer_is_refused_and_told_who_is_first(path: Path) -> None:
    with begun(path), pytest.raises(FeedError, match=rf"Another `pbm watch` \(process {os.getpid()}\) writes to"):
        Store(path)
    Store(path).close()


def test_a_writer_that_was_killed_leaves_no_lock(path: Path) -> None:
    code = f"import os, pathlib; from pbm.io.store import Store; Store(pathlib.Path({str(path)!r})); os.kill(os.getpid(), 9)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == -9
    Store(path).close()


def test_readers_see_what_is_kept_while_the_writer_goes_on(path: Path) -> None:
    with begun(path) as store:
        reader = StoreReader(path)
        assert reader.alarms() == []
        store.keep(batch())
        assert reader.alarms() == [ALARM]
        assert reader.open_alarms() == [ALARM]
        assert reader.snapshots() == [SNAPSHOT]
        assert reader.recent_results(SODIUM, 1) == results([140, 141, 142])[-1:]
    assert StoreReader(path).alarms() == [ALARM]


@pytest.mark.parametrize("change", ["delete from audit", "update audit set detail = 'another'"])
def test_an_entry_of_the_audit_is_neither_changed_nor_deleted(path: Path, change: str) -> None:
    begun(path).close()
    with sqlite3.connect(path) as connection, pytest.raises(sqlite3.IntegrityError, match="the audit is never changed"):
        connection.execute(change)


@pytest.mark.parametrize("name", ["two words", "50 % of #1", "why?", "Übersee", "a&b=c"])
def test_a_folder_may_have_any_name(tmp_path: Path, name: str) -> None:
    path = tmp_path / name / "watch.sqlite"
    path.parent.mkdir()
    with begun(path) as store:
        store.keep(batch())
    assert StoreReader(path).alarms() == [ALARM]
    assert {file.name.removeprefix("watch.sqlite") for file in path.parent.iterdir()} <= {"", ".lock", "-wal", "-shm"}


def test_a_reader_cannot_write(path: Path) -> None:
    begun(path).close()
    reader = StoreReader(path)
    with pytest.raises(OperationalError, match="readonly"), reader._engine.begin() as connection:
        connection.execute(text("delete from audit"))


def test_a_store_that_is_not_there_is_told() -> None:
    with pytest.raises(InputError, match=r"There is no store nowhere/watch\.sqlite"):
        StoreReader(Path("nowhere/watch.sqlite"))


# When it cannot go on


def test_a_store_of_another_layout_is_refused(path: Path) -> None:
    begun(path).close()
    with sqlite3.connect(path) as connection:
        connection.execute("update schema set version = 99")
    for opened in (Store, StoreReader):
        with pytest.raises(FeedError, match="has layout 99, and this version of pbm knows layouts up to 2"):
            opened(path)


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"no database, but long enough to be one " * 50, "is not a store of pbm"),
        (None, "is damaged|cannot go on|is not a store"),
    ],
)
def test_a_damaged_file_is_told(path: Path, content: bytes | None, told: str) -> None:
    if content is None:
        with begun(path) as store:
            store.keep(batch())
        whole = path.read_bytes()
        content = whole[:4096] + os.urandom(len(whole) - 4096)
    path.write_bytes(content)
    with pytest.raises(FeedError, match=told), Store(path) as store:
        store.keep(batch())


def test_a_folder_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(FeedError, match="The folder must exist"):
        Store(tmp_path / "nowhere" / "watch.sqlite")


def test_a_read_only_folder_is_told(path: Path) -> None:
    begun(path).close()
    with nobody_may_write(path.parent), pytest.raises(FeedError, match="must be allowed to write there"):
        Store(path)
    (path.parent / "watch.sqlite.lock").chmod(0o666)
    with nobody_may_write(path.parent), pytest.raises(FeedError, match=r"may not be written|cannot be opened"):
        Store(path)


@contextmanager
def nobody_may_write(folder: Path) -> Iterator[None]:
    """A folder that may be read only; for root, who may everything, as another user."""
    folder.chmod(0o555)
    user = os.geteuid()
    for place in folder.parents[:3] if user == 0 else ():
        place.chmod(0o755)
    os.seteuid(user or 65534)
    try:
        yield
    finally:
        os.seteuid(user)
        folder.chmod(0o755)


def test_a_store_locked_by_another_program_is_told(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("pbm.io.store_engine.LOCK_SECONDS", 0.1)
    with begun(path) as store, sqlite3.connect(path, isolation_level=None) as other:
        other.execute("begin immediate")
        with pytest.raises(FeedError, match="locked by another program for too long"):
            store.keep(batch())
        other.execute("rollback")
        store.keep(batch())
    assert len(tables(path)["results"]) == 3


def test_a_full_disk_is_told_and_when_there_is_space_again_it_goes_on(path: Path) -> None:
    with begun(path) as store:
        before = tables(path)
        pages = _pragma(store, "page_count")
        _pragma(store, f"max_page_count = {pages}")
        with pytest.raises(FeedError, match=r"The disk that holds .*watch\.sqlite is full"):
            for n in range(200):
                store.keep(
                    batch(results=results_kept(1000 * n), alarms=[], set_aside=[], positions={"live.csv": str(n)})
                )
        kept = tables(path)
        assert len(kept["results"]) % 2 == 0, "a batch is kept whole or not at all"
        assert len(kept["results"]) // 2 - 1 == int(kept["feeds"][0][2]) if kept["feeds"] else kept == before
        _pragma(store, "max_page_count = 100000")
        store.keep(batch(alarms=[]))
        assert len(tables(path)["results"]) == len(kept["results"]) + 3


@pytest.mark.skipif(os.geteuid() != 0 or not shutil.which("mount"), reason="a small file system is needed")
def test_on_a_file_system_without_space_nothing_that_was_kept_is_lost(tmp_path: Path) -> None:
    if subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=400k", "tmpfs", tmp_path], check=False, capture_output=True
    ).returncode:
        pytest.skip("this computer lets no file system be made")
    try:
        with begun(tmp_path / "watch.sqlite") as store:
            kept = 0
            with pytest.raises(FeedError, match="is full"):
                for n in range(2000):
                    store.keep(batch(results=results_kept(1000 * n), alarms=[], set_aside=[]))
                    kept += 2
            assert kept > 0
            assert len(store.recent_results(SODIUM, 10_000)) == kept
    finally:
        subprocess.run(["umount", "-l", tmp_path], check=True)


def _pragma(store: Store, what: str) -> int:
    with store._connection.begin():
        return int(store._connection.execute(text(f"PRAGMA {what}")).scalar_one())


def test_every_commit_reaches_the_disk(path: Path) -> None:
    with begun(path) as store:
        assert _pragma(store, "synchronous") == 2
        with store._connection.begin():
            assert store._connection.execute(text("PRAGMA journal_mode")).scalar_one() == "wal"


def test_every_transaction_begins_immediate(path: Path) -> None:
    with begun(path) as store:
        said: list[str] = []
        event.listen(store._connection.engine, "before_cursor_execute", lambda *given: said.append(given[2]))
        store.keep(batch())
    assert said[0] == "BEGIN IMMEDIATE"
