"""The promise with laboratory events in the feed: live = replay = restarted anywhere, bit for bit, while statistics begin afresh and
centres are learned again; quiet places and notices among it.
"""

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.methods.statistics import STATISTICS
from pbm.records.alarm import Alarm
from pbm.records.event import EventKind, LabEvent
from pbm.records.notice import Notice
from pbm.records.plan import Plan
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.rhythm import Rhythm
from pbm.records.snapshot import Batch, Earlier, Snapshot
from pbm.records.stream import StreamName
from pbm.stages.live import Live
from tests.contract.test_live_monitor import PREPARATIONS, case
from tests.live_laboratory import MINUTE, SODIUM, every_line, laboratory, plan, two_lines

LAB = laboratory().model_copy(
    update={"events": laboratory().events.model_copy(update={"relearn_over": 25, "relearn_at_most": 0.5})}
)
FEED = two_lines(3, 900)
KINDS: tuple[EventKind, ...] = (
    "reagent lot",
    "calibration",
    "control accepted",
    "control rejected",
    "keep the old centre",
    "restart",
    "maintenance",
)
Item = Result | LabEvent


def with_rhythms(given: Plan) -> Plan:
    """The plan with rhythms so narrow that the feed's gaps exceed them now and then."""
    stream = Rhythm(quiet_at=1.5, false_per_day=1.0, by_hour=tuple(30.0 + hour % 7 for hour in range(168)))
    analyser = Rhythm(quiet_at=2.5, false_per_day=1.0, by_hour=tuple(70.0 + hour % 5 for hour in range(168)))
    streams = {name: one.model_copy(update={"rhythm": stream}) for name, one in given.streams.items()}
    return given.model_copy(update={"streams": streams, "analysers": {"line-1": analyser, "line-2": analyser}})


PLAN = with_rhythms(every_line())


def with_gaps(feed: Sequence[Result]) -> list[Result]:
    """Every 60 results nothing comes for some minutes."""
    return [replace(one, time=one.time + (place // 60) * 7 * MINUTE) for place, one in enumerate(feed)]


def with_events(feed: Sequence[Result]) -> list[Item]:
    """Events of every kind, about streams and analysers, each just before the results of its time."""
    items: list[Item] = []
    for place, result in enumerate(feed):
        if place % 45 == 44:
            number = place // 45
            analyser, analyte = ("line-1", "line-2")[number % 2], ("", "sodium", "tsh")[number % 3]
            items.append(LabEvent(result.time, KINDS[number % len(KINDS)], analyte, analyser, f"n {number}", "feed", 0))
        items.append(result)
    return items


ITEMS = with_events(with_gaps(FEED))


@dataclass
class Kept:
    """What a store keeps of batches, as far as a watch needs it to go on."""

    results: list[Result] = field(default_factory=list)
    alarms: list[Alarm] = field(default_factory=list)
    events: list[LabEvent] = field(default_factory=list)
    notices: dict[tuple[Any, ...], Notice] = field(default_factory=dict)
    states: dict[tuple[StreamName, int], Snapshot] = field(default_factory=dict)
    newest: dict[StreamName, Sequence[int]] = field(default_factory=dict)
    clock: str = ""

    def keep(self, batch: Batch) -> None:
        self.results += [one.result for one in batch.results if not one.left_out]
        self.alarms += [alarm for _, alarm in batch.alarms]
        self.events += [event for _, event in batch.events]
        self.notices |= {(one.time, one.kind, one.analyte, one.analyser): one for one in batch.notices}
        self.states |= {(one.stream, one.monitor): one for one in batch.snapshots}
        self.newest |= dict(batch.newest)
        self.clock = batch.positions.get("clock", self.clock)

    def recent(self, name: StreamName, count: int) -> list[Result]:
        return [one for one in self.results if one.stream == name][-count:]

    def restarted(self, given: Plan = PLAN) -> Live:
        live = Live(LAB, given, "sha")
        opened = [one for one in self.notices.values() if one.closed_at is None]
        live.go_on(self.states.values(), self.newest, self.recent, self.events, self.clock, opened)
        return live


def run(items: Sequence[Item], batch: int = 10**6, given: Plan = PLAN) -> Kept:
    """One undisturbed run, in batches of so many pieces."""
    kept, live = Kept(), Live(LAB, given, "sha")
    for first in range(0, len(items), batch):
        kept.keep(live.take([Chunk("feed", 1, items[first : first + batch], "")], Earlier()))
    return kept


WHOLE = run(ITEMS)


def what_counts(kept: Kept) -> list[Any]:
    """Alarms, states, events with their effects, notices."""
    states = {key: one.state for key, one in kept.states.items()}
    return [kept.alarms, states, kept.events, sorted(kept.notices.items()), kept.clock]


def test_the_feed_meets_all_that_is_to_be_tested() -> None:
    kinds = {one.kind for one in WHOLE.notices.values()}
    assert {"quiet", "centre learned again"} <= kinds
    assert len(WHOLE.alarms) >= 6
    assert {alarm.last_control_passed for alarm in WHOLE.alarms} == {True, False, None}
    assert {one.kind for one in WHOLE.events} == set(KINDS)
    assert what_counts(run([one for one in ITEMS if isinstance(one, Result)]))[0] != WHOLE.alarms


@pytest.mark.parametrize("batch", [1, 7, 64])
def test_the_size_of_batches_changes_nothing(batch: int) -> None:
    assert what_counts(run(ITEMS, batch)) == what_counts(WHOLE)


def test_restarted_after_any_piece_nothing_changes() -> None:
    """A chain of runs, each of one piece and killed; and one restart at each of many places."""
    chain = Kept()
    for piece in ITEMS:
        chain.keep(chain.restarted().take([Chunk("feed", 1, [piece], "")], Earlier()))
    assert what_counts(chain) == what_counts(WHOLE)


@pytest.mark.parametrize("cut", range(5, len(ITEMS), 61))
def test_restarted_once_nothing_changes(cut: int) -> None:
    kept = run(ITEMS[:cut], 50)
    kept.keep(kept.restarted().take([Chunk("feed", 1, ITEMS[cut:], "")], Earlier()))
    assert what_counts(kept) == what_counts(WHOLE)


@given(st.data())
@settings(max_examples=30, deadline=None)
def test_events_that_come_before_the_results_of_their_time_come_soon_enough(data: st.DataObject) -> None:
    """A replay that knows all events from the begin, and a live feed that learns of each at the last moment, agree bit for bit."""
    events = [one for one in ITEMS if isinstance(one, LabEvent)]
    results = [one for one in ITEMS if isinstance(one, Result)]
    latest = [next(n for n, one in enumerate(results) if one.time >= event.time) for event in events]
    places = [data.draw(st.integers(0, late)) for late in latest]
    items: list[Item] = []
    for n, result in enumerate(results):
        items += [event for event, place in zip(events, places, strict=True) if place == n]
        items.append(result)
    moved = run(items)
    assert moved.alarms == WHOLE.alarms
    assert {key: one.state for key, one in moved.states.items()} == {
        key: one.state for key, one in WHOLE.states.items()
    }
    assert sorted(moved.notices.items()) == sorted(WHOLE.notices.items())


def test_an_event_that_comes_twice_counts_once() -> None:
    twice = [piece for one in ITEMS for piece in ([one, one] if isinstance(one, LabEvent) else [one])]
    assert what_counts(run(twice)) == what_counts(WHOLE)
    again = Kept()
    again.keep(Live(LAB, PLAN, "sha").take([Chunk("feed", 1, ITEMS, "")], Earlier()))
    again.keep(again.restarted().take([Chunk("feed", 1, [x for x in ITEMS if isinstance(x, LabEvent)], "")], Earlier()))
    assert what_counts(again) == what_counts(WHOLE)


CASES = list(itertools.product(STATISTICS, ("as it is", "winsorized", "logarithm", "patient mix")))


@pytest.mark.parametrize(("statistic", "preparation"), CASES, ids=[" of ".join(pair) for pair in CASES])
def test_every_statistic_begins_afresh_and_learns_its_centre_through_restarts(statistic: str, preparation: str) -> None:
    tried = case(statistic, PREPARATIONS[preparation], 220, seed=5)
    given = plan(sodium_line_1=[tried.plan])
    kinds: tuple[EventKind, ...] = ("reagent lot", "keep the old centre", "restart", "calibration")
    events = [
        LabEvent(tried.results[place].time, kind, "sodium", "line-1", "", "", 0)
        for place, kind in zip((40, 100, 130, 160), kinds, strict=True)
    ]
    items: list[Item] = [*events, *tried.results]
    whole, chain = run(items, given=given), Kept()
    for piece in items:
        chain.keep(chain.restarted(given).take([Chunk("feed", 1, [piece], "")], Earlier()))
    assert what_counts(chain) == what_counts(whole)
    assert whole.states[SODIUM, 0].state != run(tried.results, given=given).states[SODIUM, 0].state
