"""The store in a file of SQLite: on the disk with every commit, searched by index, and what it says when it cannot go on."""

import os
import sqlite3
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import pytest
from sqlalchemy import text
from sqlalchemy.exc import OperationalError

from pbm.errors import FeedError, InputError, StoreWaits
from pbm.io.store import Store
from pbm.io.store_reader import StoreReader
from pbm.records.message import Answered, MessageKey
from tests.io.store_samples import ALARM, SNAPSHOT, batch, begun, results_kept, tables
from tests.live_laboratory import SODIUM
from tests.small_disk import enlarge, nobody_may_write, small_disk


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "watch.sqlite"


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


def test_a_copy_on_a_medium_that_cannot_be_written_is_read(path: Path) -> None:
    with begun(path) as store:
        store.keep(batch())
    with nobody_may_write(path.parent):
        assert StoreReader(path).alarms() == [ALARM]


def test_a_store_that_is_not_there_is_told() -> None:
    with pytest.raises(InputError, match=r"There is no store nowhere/watch\.sqlite"):
        StoreReader(Path("nowhere/watch.sqlite"))


# When it cannot go on


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


def test_a_library_that_is_too_old_is_refused(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("sqlite3.sqlite_version_info", (3, 31, 1))
    with pytest.raises(FeedError, match=r"the store needs 3\.32\.0 or later"):
        Store(path)


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


def test_a_store_locked_by_another_program_is_told(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("pbm.io.store_engine.LOCK_SECONDS", 0.1)
    with begun(path) as store, sqlite3.connect(path, isolation_level=None) as other:
        other.execute("begin immediate")
        with pytest.raises(StoreWaits, match="locked by another program for too long"):
            store.keep(batch())
        other.execute("rollback")
        store.keep(batch())
    assert len(tables(path)["results"]) == 3


def test_a_full_disk_is_told_and_when_there_is_space_again_it_goes_on(path: Path) -> None:
    with begun(path) as store:
        before = tables(path)
        pages = _pragma(store, "page_count")
        _pragma(store, f"max_page_count = {pages}")
        with pytest.raises(StoreWaits, match=r"The disk that holds .*watch\.sqlite is full"):
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


def test_on_a_disk_without_space_nothing_that_was_kept_is_lost_and_it_goes_on_when_there_is_some(
    tmp_path: Path,
) -> None:
    with small_disk(tmp_path, "400k"), begun(tmp_path / "watch.sqlite") as store:
        kept = 0
        with pytest.raises(StoreWaits, match="is full"):
            for n in range(2000):
                some = batch(results=results_kept(1000 * n), alarms=[], set_aside=[])
                store.keep(some)
                kept += 2
        assert kept > 0
        with pytest.raises(StoreWaits, match="is full"):
            store.keep(some)
        assert len(store.recent_results(SODIUM, 10_000)) == kept
        enlarge(tmp_path, "2m")
        store.keep(some)
        assert len(store.recent_results(SODIUM, 10_000)) == kept + 2


def _pragma(store: Store, what: str) -> int:
    with store._connection.begin():
        return int(store._connection.execute(text(f"PRAGMA {what}")).scalar_one())


def test_of_a_log_that_was_cut_anywhere_whole_batches_are_left(path: Path, tmp_path: Path) -> None:
    """What a power cut leaves: all of the first batches, with their alarms, states, positions and answers, and nothing of the next."""
    with Store(path) as store:
        store._connection.exec_driver_sql("PRAGMA wal_autocheckpoint = 0")
        store._connection.rollback()
        ends = [tables(path)]
        store.begin(1, "watch begun", "sha", "", [SNAPSHOT])
        ends.append(tables(path))
        for n in range(8):
            key = MessageKey("LIS", str(n), f"{n:064x}")
            store.keep(
                batch(
                    results=results_kept(1000 * n, 20),
                    alarms=[(3, ALARM)],
                    snapshots=[replace(SNAPSHOT, taken=n + 1)],
                    positions={"live.csv": str(n)},
                    messages=[Answered(key, "AA", n)],
                )
            )
            ends.append(tables(path))
        log = path.with_name("watch.sqlite-wal").read_bytes()
        for cut in [*range(0, len(log), len(log) // 60), len(log)]:
            (folder := tmp_path / f"cut-{cut}").mkdir()
            copy = folder / "watch.sqlite"
            copy.write_bytes(path.read_bytes())
            copy.with_name("watch.sqlite-wal").write_bytes(log[:cut])
            with closing(sqlite3.connect(copy)) as connection:
                made = connection.execute("select count(*) from sqlite_master").fetchone()[0]
            if made:
                assert tables(copy) in ends
        assert tables(copy) == ends[-1]


def test_every_commit_reaches_the_disk(path: Path) -> None:
    with begun(path) as store:
        assert _pragma(store, "synchronous") == 2
        with store._connection.begin():
            assert store._connection.execute(text("PRAGMA journal_mode")).scalar_one() == "wal"


def test_every_transaction_begins_immediate(path: Path) -> None:
    with begun(path) as store:
        said: list[str] = []
        driver = store._connection.connection.dbapi_connection
        assert isinstance(driver, sqlite3.Connection)
        driver.set_trace_callback(said.append)
        store.keep(batch())
    assert said[0] == "BEGIN IMMEDIATE" and said[-1] == "COMMIT"


def test_a_store_that_turns_read_only_is_told_and_when_it_may_be_written_again_it_goes_on(path: Path) -> None:
    with begun(path) as store:
        store._connection.exec_driver_sql("PRAGMA query_only = 1")
        store._connection.commit()
        with pytest.raises(StoreWaits, match="may not be written"):
            store.keep(batch())
        store._connection.exec_driver_sql("PRAGMA query_only = 0")
        store._connection.commit()
        store.keep(batch())
    assert len(tables(path)["results"]) == 3
