"""A check of a store finds what was changed, cut or lost behind the back of pbm, and nothing where nothing was."""

import re
import sqlite3
from dataclasses import replace
from pathlib import Path

import pytest

from pbm.io import store_audit
from pbm.io.store import Store
from pbm.io.store_check import check_store
from pbm.io.store_place import Place
from pbm.io.store_retention import Sweep
from pbm.records.event import LabEvent
from pbm.records.reading import Chunk, SetAside
from pbm.records.snapshot import RERUN, Batch, KeptResult
from pbm.stages.live import Live
from tests.io.store_samples import ALARM, FEED, batch, begun, results_kept, spoil, tables
from tests.live_laboratory import MINUTE, START, every_line, laboratory, two_lines


@pytest.fixture
def whole(place: Place) -> Place:
    """A store with results, copies, pieces set aside, an alarm and five entries of audit."""
    again = Batch(positions={"live.csv": "19"}, delivered={"live.csv": 3}, tallies={"duplicate": 3})
    event = LabEvent(START, "calibration", "", "line-1", "", "by hand", START)
    with begun(place) as store:
        store.keep(batch(alarms=[(2, replace(ALARM, time=START + 2 * MINUTE))], delivered={"live.csv": 4}))
        store.keep(again)
        store.keep(Batch(events=[(0, replace(event, at=START + n)) for n in range(3)]))
        store.begin(9, "watch begun", "another", "", store.snapshots())
    return place


def wrong(place: Place, head: str = "") -> dict[str, tuple[str, ...]]:
    """What each check found wrong, but for those that found nothing."""
    return {one.what: one.wrong for one in check_store(place, head) if one.wrong}


def unguard(place: Place) -> None:
    """What a person who means it can always do."""
    if isinstance(place, Path):
        spoil(place, "drop trigger audit_is_never_changed", "drop trigger audit_is_never_cut")
    else:
        spoil(place, "drop trigger audit_is_never_changed on audit")


def test_nothing_is_found_in_a_whole_store(whole: Place) -> None:
    assert wrong(whole) == {}
    said = {one.what: one.told for one in check_store(whole)}
    assert said["account"] == (
        "3 results + 1 set aside + 3 duplicates + 0 removed as too old = 7; the feeds delivered 7"
    )
    assert said["audit"].startswith("5 entries")


def test_a_store_can_be_checked_while_it_is_written(whole: Place) -> None:
    with Store(whole) as store:
        store.keep(Batch(results=results_kept(100), positions={"live.csv": "20"}, delivered={"live.csv": 2}))
        assert wrong(whole) == {}


def test_the_account_of_a_watch_with_copies_reruns_and_retention_adds_up(place: Place) -> None:
    live, feed = Live(laboratory(), every_line(), "sha"), two_lines(3, 6000)
    rerun = [replace(one, time=one.time + MINUTE) for one in feed[-40:]]
    items = [*feed, *rerun, *feed[-60:], *(SetAside(n, "not JSON") for n in range(30))]
    with Store(place) as store:
        store.begin(1, "watch begun", "sha", "", [one.snapshot() for one in live.monitors])
        for start in range(0, len(items), 500):
            part = items[start : start + 500]
            known = store.earlier(one for one in part if not isinstance(one, SetAside))
            store.keep(live.take([Chunk("live.csv", 1, part, "")], known))
        going: Sweep | None = Sweep(START + 99_999 * MINUTE)
        while going:
            going = store.remove_old(going, 1)
    assert wrong(place) == {}
    told = next(one.told for one in check_store(place) if one.what == "account")
    held, aside, duplicates, removed, _, delivered = (
        int(text.replace(",", "")) for text in re.findall(r"[\d,]+", told)
    )
    assert (held + removed, aside, duplicates, delivered) == (6040, 30, 60, 6130)
    assert removed > 2500


@pytest.mark.parametrize(
    ("change", "found"),
    [
        ("delete from results where seq = 1", {"account": ("1 do not add up",)}),
        ("update tallies set count = 2 where reason = 'duplicate'", {"account": ("1 do not add up",)}),
        (
            "update tallies set count = 0 where reason = 'not a number'",
            {"reasons": ('"not a number" is kept 1 times and counted 0',)},
        ),
        ("update alarms set seq = 2", {"alarms": ("alarm 1 is about result 2, which is not there",)}),
    ],
)
def test_what_is_lost_or_altered_is_found(whole: Place, change: str, found: dict[str, tuple[str, ...]]) -> None:
    spoil(whole, change)
    assert wrong(whole) == found


def test_a_result_kept_more_often_than_counted_is_found(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch(results=[KeptResult(one.result, RERUN, FEED) for one in results_kept(1)], alarms=[]))
    assert '"rerun of the specimen" is kept 2 times and counted 0' in wrong(place)["reasons"]


@pytest.mark.parametrize(
    ("change", "told"),
    [
        ("update audit set detail = 'nothing happened' where id = 3", 'entry 3 ("calibration") or the one before'),
        ("update audit set at = at + 1 where id = 1", 'entry 1 ("watch begun") or the one before it is not as'),
        ("update audit set plan_after = 'mine' where id = 5", 'entry 5 ("watch begun") or the one before it is not as'),
        ("delete from audit where id = 2", "entry 2 is missing; the next one is 3"),
        ("delete from audit where id >= 4", "entries 4 to 5 are missing at its end"),
        ("delete from audit", "entries 1 to 5 are missing at its end"),
        ("delete from audit_head", "where it ends is not kept any more"),
    ],
)
def test_an_audit_that_was_changed_or_cut_is_found(whole: Place, change: str, told: str) -> None:
    unguard(whole)
    spoil(whole, change)
    assert any(line.startswith(told) for line in wrong(whole)["audit"])


def test_an_audit_written_anew_to_its_end_is_found_by_a_hash_that_was_noted(whole: Place) -> None:
    """Who changes an entry, all hashes after it and the kept end leaves a whole chain: only a hash noted elsewhere shows it."""
    noted = tables(whole)["audit"][-1][-1]
    assert wrong(whole, noted) == {} and wrong(whole, noted[:12]) == {}
    unguard(whole)
    spoil(whole, "update audit set detail = 'nothing happened' where id = 3")
    before = store_audit.FIRST
    for row in tables(whole)["audit"]:
        names = ("id", "at", "what", "plan_before", "plan_after", "detail")
        before = store_audit.entry_hash(before, dict(zip(names, row[:-1], strict=True)))
        spoil(whole, f"update audit set hash = '{before}' where id = {row[0]}")
    spoil(whole, f"update audit_head set hash = '{before}'")
    assert wrong(whole) == {}
    assert wrong(whole, noted) == {"audit": (f"no entry has the hash {noted} that was noted",)}


def test_a_row_that_refers_to_nothing_is_found(tmp_path: Path) -> None:
    begun(path := tmp_path / "watch.sqlite").close()
    spoil(path, "update monitors set stream = 7")
    assert wrong(path) == {"references": ("row 1 of monitors refers to a row of streams that is not there",)}


def test_a_file_with_a_damaged_page_is_found(tmp_path: Path) -> None:
    with begun(path := tmp_path / "watch.sqlite") as store:
        store.keep(Batch(results=results_kept(1, 4000), positions={"live.csv": ""}, delivered={"live.csv": 4000}))
    with sqlite3.connect(path) as connection:
        page = connection.execute("select rootpage from sqlite_master where name = 'one_result_once'").fetchone()[0]
        size = connection.execute("pragma page_size").fetchone()[0]
    with path.open("r+b") as file:
        file.seek((page - 1) * size)
        file.write(b"\xff" * size)
    found = wrong(path)
    assert found["database"]
    assert set(found) <= {"database", "account", "references", "reasons", "alarms"}
