"""Laboratory events: read as they were written, handed to the monitors that they are about, once."""

from dataclasses import replace
from datetime import UTC, datetime

import pytest

from pbm.records.event import EVENT_KINDS, LabEvent
from pbm.records.reading import Chunk, EventReading, SetAside
from pbm.records.snapshot import Batch, Earlier
from pbm.stages.event_reading import event_kind, read_event
from pbm.stages.live import Live
from tests.live_laboratory import MINUTE, START, every_line, laboratory, results

LAB = laboratory()
READING = EventReading(4, "2031-03-02T10:00:00", "Reagent-Lot", "NA", "line-2", "lot 4711")


def test_an_event_is_read_by_the_spellings_and_clocks_of_the_laboratory() -> None:
    at = round(datetime(2031, 3, 2, 11, tzinfo=UTC).timestamp()) * 1_000_000
    read = read_event(READING, LAB, "feed", 77)
    assert read == LabEvent(at, "reagent lot", "sodium", "line-2", "lot 4711", "feed", 77)
    assert read_event(READING, LAB, "feed", None) == replace(read, at=at)  # type: ignore[type-var]


@pytest.mark.parametrize(
    ("changed", "reason", "found"),
    [
        ({"event": "lunch"}, "unknown event", "lunch"),
        ({"time": "10 o'clock"}, "not a time", "10 o'clock"),
        ({"time": ""}, "no time", ""),
        ({"analyte": "XYZ"}, "unknown test", "XYZ"),
        ({"analyser": ""}, "no analyser given", ""),
        ({"analyser": "x" * 100}, "not the name of an analyser", ""),
    ],
)
def test_what_is_no_event_is_set_aside_with_its_reason(changed: dict[str, str], reason: str, found: str) -> None:
    assert read_event(READING._replace(**changed), LAB, "feed", None) == SetAside(4, reason, found)  # type: ignore[arg-type]


@pytest.mark.parametrize("kind", EVENT_KINDS)
def test_every_kind_is_known_in_any_spelling(kind: str) -> None:
    assert event_kind(kind) == event_kind(kind.upper().replace(" ", "_")) == event_kind(f" {kind} ") == kind


def take(live: Live, *events: LabEvent) -> Batch:
    return live.take([Chunk("feed", 1, events, "")], Earlier())


def event(kind: str = "reagent lot", analyte: str = "", analyser: str = "line-1", time: int = START) -> LabEvent:
    return LabEvent(time, kind, analyte, analyser, "", "feed", 0)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("given", "monitors"),
    [
        (event(), 2),
        (event(analyte="tsh"), 1),
        (event(analyser="line-2"), 2),
        (event(analyte="sodium", analyser=""), 3),
        (event(analyser="line-9"), 0),
    ],
)
def test_an_event_reaches_the_monitors_of_its_streams_and_says_what_they_do(given: LabEvent, monitors: int) -> None:
    live = Live(LAB, every_line(), "")
    batch = take(live, given)
    ((place, taken),) = batch.events
    assert place == 0
    assert sum(bool(one._waiting) for one in live.monitors) == monitors
    if not monitors:
        assert taken.effect == "no monitor is concerned"
    else:
        does = "begin afresh and learn their centre again over 200 results, at most 0.25 TEa away"
        assert taken.effect == f"{monitors} monitor{'s' * (monitors > 1)} to {does}"
    assert len(batch.snapshots) == monitors, "the event is part of the state that is kept"


def test_the_same_event_again_is_counted_as_a_duplicate() -> None:
    live = Live(LAB, every_line(), "")
    batch = take(live, event(), event(), event(time=START + MINUTE))
    assert len(batch.events) == 2 and batch.tallies == {"event known already": 1}
    live.go_on([], {}, lambda *_: [], [one for _, one in batch.events])
    assert take(live, event()).events == []


def test_an_event_older_than_a_day_is_kept_and_changes_nothing() -> None:
    live = Live(LAB, every_line(), "")
    live.take([Chunk("feed", 1, results([140.0] * 5), "")], Earlier())
    batch = take(live, event(time=START - 25 * 60 * MINUTE, analyte="sodium"))
    assert batch.events[0][1].effect == "no monitor is concerned; too late for 1 stream"
    assert not any(one._waiting for one in live.monitors)
