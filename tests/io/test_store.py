"""The store, in either database: all of a batch or nothing, one writer, readers beside it."""

import os
import sqlite3
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from unittest.mock import ANY

import pytest
from sqlalchemy.exc import DBAPIError

from pbm.errors import FeedError
from pbm.io.store import Store
from pbm.io.store_place import Place
from pbm.io.store_reader import StoreReader
from pbm.io.store_schema import SCHEMA_VERSION
from pbm.records.event import LabEvent
from pbm.records.message import Annotation, Answered, MessageKey
from pbm.records.notice import Heartbeat, Notice
from pbm.records.reading import SetAside
from pbm.records.snapshot import LATE, REPEAT, RERUN, Batch, Edition, KeptResult
from tests.io.store_samples import ALARM, FEED, SNAPSHOT, batch, begun, results_kept, spoil, tables
from tests.live_laboratory import MINUTE, SODIUM, SODIUM_2, START, results

KEY = MessageKey("LIS^TERN BAY", "000123", "ab" * 32)


def test_what_was_kept_is_there_when_the_store_is_opened_again(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch())
    with Store(place) as store:
        assert store.position("live.csv") == "17"
        assert store.snapshots() == [SNAPSHOT]
        assert store.recent_results(SODIUM, 2) == results([140, 141, 142])[1:]
        assert store.newest_times() == {SODIUM: [1, 2, 3]}
        assert store.open_alarms() == [ALARM]
        assert store.plan_in_force() == "sha"


def test_numbers_come_back_to_the_last_bit(place: Place) -> None:
    odd = [0.1 + 0.2, 1e-300, 138.00000000000003, -1.5e9]
    with begun(place) as store:
        store.keep(batch(results=[KeptResult(one, "", FEED) for one in results(odd)], alarms=[]))
        assert [one.value.hex() for one in store.recent_results(SODIUM, 9)] == [value.hex() for value in odd]


@pytest.mark.parametrize(
    "text", ["a\0b", "\ue000", "\ue0000", "\0e\ue000\0", "µ Übersee 検体", "\u2028'\";--"], ids=repr
)
def test_whatever_a_feed_may_hold_is_kept_as_it_is_and_found_again(place: Place, text: str) -> None:
    one = replace(results([140])[0], specimen=f"31-{text}", ward=text)
    key = KEY._replace(sender=text, control_id=f"7{text}")
    aside = [("live.csv", SetAside(4, "unknown test", text))]
    with begun(place) as store:
        store.keep(
            batch(results=[KeptResult(one, "", FEED)], alarms=[], set_aside=aside, messages=[Answered(key, "AA", 1)])
        )
        assert store.recent_results(SODIUM, 1) == [one]
        found = store.earlier([one], [key])
        assert list(found.runs) == [(SODIUM, one.specimen)] and found.answered == {key: "AA"}
    assert [row[4] for row in tables(place)["set_aside"]] == [text]


def test_an_alarm_without_estimate_or_control_comes_back_as_it_was(place: Place) -> None:
    bare = replace(ALARM, estimate=None, last_control=None)
    with begun(place) as store:
        store.keep(batch(alarms=[(0, bare)]))
        assert store.open_alarms() == [bare]


def test_a_batch_that_fails_leaves_nothing_and_can_be_tried_again(place: Place) -> None:
    with begun(place) as store:
        before = tables(place)
        broken = batch(results=[KeptResult(one, "", FEED) for one in [*results([140]), *results([140])]])
        with pytest.raises(FeedError, match="cannot go on"):
            store.keep(broken)
        assert tables(place) == before
        store.keep(batch())
        assert len(tables(place)["results"]) == 3


def test_results_are_numbered_in_order_of_arrival(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch())
        store.keep(
            batch(results=[KeptResult(one, "", FEED) for one in results([1, 2], first=50)], alarms=[], set_aside=[])
        )
    assert [row[0] for row in tables(place)["results"]] == [1, 2, 3, 4, 5]


def test_tallies_add_up(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch())
        store.keep(batch(results=[], alarms=[], tallies={"not a number": 2, "duplicate": 5}))
    assert tables(place)["tallies"] == [("duplicate", 5), ("not a number", 3)]


def test_earlier_runs_of_a_specimen_are_found_in_every_stream(place: Place) -> None:
    one, other, third = results([140, 141, 142])
    kept = [
        KeptResult(one, "", FEED),
        KeptResult(other, RERUN, FEED),
        KeptResult(replace(one, stream=SODIUM_2), "", FEED),
    ]
    with begun(place) as store:
        store.keep(batch(results=kept, alarms=[]))
        found = store.earlier([replace(one, value=150.0), other, third])
    assert found.runs == {
        (SODIUM, one.specimen): {(one.time, 140.0, 0): True},
        (SODIUM_2, one.specimen): {(one.time, 140.0, 0): True},
        (SODIUM, other.specimen): {(other.time, 141.0, 0): False},
    }


def test_results_without_a_specimen_are_found_by_their_time_with_their_editions(place: Place) -> None:
    bare = replace(results([140])[0], specimen="")
    again = Edition("live.csv", 2)
    with begun(place) as store:
        store.keep(
            batch(
                results=[KeptResult(bare, "", FEED), KeptResult(bare, "", FEED), KeptResult(bare, "", again)], alarms=[]
            )
        )
        found = store.earlier([bare, replace(bare, time=bare.time + 1)])
    assert found.unnamed == {(SODIUM, bare.time, 140.0, 0): {FEED, again}}
    assert not found.runs


def test_earlier_visits_of_a_patient_are_found_but_not_those_that_do_not_count(place: Place) -> None:
    some = [replace(one, patient="token") for one in results([140, 141, 142])]
    kept = [KeptResult(one, left_out, FEED) for one, left_out in zip(some, ("", REPEAT, LATE), strict=True)]
    with begun(place) as store:
        store.keep(batch(results=kept, alarms=[]))
        found = store.earlier(
            [replace(some[0], specimen="31-new"), replace(some[1], specimen="31-other", patient="another")]
        )
    assert found.visits == {(SODIUM, "token"): [some[0].time, some[2].time]}


def test_a_plan_that_takes_over_puts_its_monitors_in_place_and_leaves_a_mark(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch())
        store.begin(
            99, "watch begun", "other", "1 monitors go on", [SNAPSHOT, replace(SNAPSHOT, monitor=1, value=float("nan"))]
        )
        assert [one.monitor for one in store.snapshots()] == [0, 1]
    assert tables(place)["audit"] == [
        (1, 1, "watch begun", "", "sha", "", ANY),
        (2, 99, "watch begun", "sha", "other", "1 monitors go on", ANY),
    ]


def test_an_alarm_is_open_until_its_episode_closes(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch())
        store.keep(batch(results=results_kept(50), alarms=[(0, replace(ALARM, time=8))], set_aside=[]))
        assert [one.time for one in store.open_alarms()] == [8]
        store.keep(batch(results=[], alarms=[], snapshots=[replace(SNAPSHOT, episode=0)]))
        assert store.open_alarms() == []


# What comes beside results

EVENT = LabEvent(START, "reagent lot", "sodium", "line-1", "R-2031-07", "events.ndjson", START + 5, "level re-learned")
NOTICE = Notice(START, "quiet", "sodium", "line-2", "line-2 quiet for 45 min, 20 expected")
ANNOTATION = Annotation(SODIUM, "31-1", START, "C", "141", START + 9, "live.csv", 7)
BEAT = Heartbeat(START, START + 1, 42, None, None)


def test_a_message_is_answered_once_the_batch_that_holds_it_is_kept(place: Place) -> None:
    other = KEY._replace(sha256="cd" * 32)
    asked = [other, KEY._replace(sender="another"), KEY._replace(control_id="000124")]
    with begun(place) as store:
        assert store.earlier([], [KEY]).answered == {}
        store.keep(batch(messages=[Answered(KEY, "AA", 5)]))
        assert store.earlier([], asked).answered == {KEY: "AA"}, "by its number, whatever it holds"
        with pytest.raises(FeedError):
            store.keep(batch(results=results_kept(90), alarms=[], set_aside=[], messages=[Answered(KEY, "AA", 6)]))
        assert len(store.recent_results(SODIUM, 99)) == 3
        store.keep(Batch(messages=[Answered(other, "AE", 7)]))
        assert store.earlier([], [KEY]).answered == {KEY: "AA", other: "AE"}
    assert tables(place)["messages"][0] == ("LIS^TERN BAY", "000123", bytes.fromhex("ab" * 32), "AA", 5, 3)


def test_annotations_events_and_notices_come_back_as_they_were(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch(annotations=[ANNOTATION], events=[(1, EVENT)], notices=[NOTICE]))
        assert store.events() == [EVENT] and store.open_notices() == [NOTICE]
    reader = StoreReader(place)
    assert (reader.annotations(), reader.events(), reader.notices()) == ([ANNOTATION], [EVENT], [NOTICE])
    assert [row[8] for row in tables(place)["events"]] == [1], "after the first result of the batch"
    assert reader.recent_results(SODIUM, 1)[0].value == 142, "a later word never rewrites a result"


def test_a_notice_ends_under_the_name_with_which_it_began(place: Place) -> None:
    ended = replace(NOTICE, text="line-2 was quiet for 50 min", closed_at=START + MINUTE)
    with begun(place) as store:
        store.keep(Batch(notices=[NOTICE]))
        store.keep(Batch(notices=[ended, replace(NOTICE, analyser="line-1")]))
        assert store.open_notices() == [replace(NOTICE, analyser="line-1")]
    assert StoreReader(place).notices() == [ended, replace(NOTICE, analyser="line-1")]


def test_a_laboratory_event_leaves_a_mark_in_the_audit(place: Place) -> None:
    with begun(place) as store:
        store.keep(Batch(events=[(0, EVENT)]))
    told = "sodium@line-1; R-2031-07; events.ndjson; level re-learned"
    assert tables(place)["audit"][-1][1:-1] == (START + 5, "reagent lot", "sha", "sha", told)


def test_the_last_sign_of_life_is_kept(place: Place) -> None:
    with begun(place) as store:
        assert StoreReader(place).heartbeat() is None
        store.beat(BEAT)
        store.beat(replace(BEAT, at=START + 9, last_result=START, last_arrival=START + 2, state='{"armed": 3}'))
    assert StoreReader(place).heartbeat() == Heartbeat(START, START + 9, 42, START, START + 2, '{"armed": 3}')
    assert len(tables(place)["heartbeat"]) == 1


def test_what_a_feed_delivered_adds_up(place: Place) -> None:
    with begun(place) as store:
        store.keep(batch(delivered={"live.csv": 4}))
        store.keep(Batch(positions={"live.csv": "30", "-": ""}, delivered={"live.csv": 2}))
    assert [row[1:] for row in tables(place)["feeds"]] == [("live.csv", "30", 6, 0), ("-", "", 0, 0)]


# One writer, many readers


def test_a_second_writer_is_refused_and_told_who_is_first(place: Place) -> None:
    with begun(place), pytest.raises(FeedError, match=rf"Another `pbm watch` \(process {os.getpid()}\) writes to"):
        Store(place)
    Store(place).close()


def test_a_writer_that_was_killed_leaves_no_lock(place: Place) -> None:
    written = (None, str(place)) if isinstance(place, Path) else (place.render_as_string(False), "")
    code = (
        "import os, pathlib; from pbm.io.store import Store; from pbm.io.store_place import store_place; "
        f"Store(store_place({written[0]!r}, pathlib.Path({written[1]!r}))); os.kill(os.getpid(), 9)"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == -9
    Store(place).close()


def test_readers_see_what_is_kept_while_the_writer_goes_on(place: Place) -> None:
    with begun(place) as store:
        reader = StoreReader(place)
        assert reader.alarms() == []
        store.keep(batch())
        assert reader.alarms() == [ALARM]
        assert reader.open_alarms() == [ALARM]
        assert reader.snapshots() == [SNAPSHOT]
        assert reader.recent_results(SODIUM, 1) == results([140, 141, 142])[-1:]
    assert StoreReader(place).alarms() == [ALARM]


@pytest.mark.parametrize("change", ["delete from audit", "update audit set detail = 'another'"])
def test_an_entry_of_the_audit_is_neither_changed_nor_deleted(place: Place, change: str) -> None:
    begun(place).close()
    with pytest.raises((DBAPIError, sqlite3.IntegrityError), match="the audit is never changed"):
        spoil(place, change)


def test_a_store_of_another_layout_is_refused(place: Place) -> None:
    begun(place).close()
    spoil(place, "update schema set version = 99")
    for opened in (Store, StoreReader):
        with pytest.raises(
            FeedError, match=f"has layout 99, and this version of pbm knows layouts up to {SCHEMA_VERSION}"
        ):
            opened(place)
