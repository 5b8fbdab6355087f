"""Results that wait a little: taken in the order of measurement whatever the order of arrival, through restarts, within bounds."""

import random
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.records.laboratory import Lab
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.snapshot import Batch, Earlier, Edition
from pbm.stages import reorder
from pbm.stages.live import Live
from pbm.stages.reorder import ReorderBuffer
from tests.contract.test_live_events import Kept
from tests.live_laboratory import MINUTE, SODIUM, START, every_line, laboratory, results, two_lines

SECOND = 1_000_000
WAIT, LONG = 40 * SECOND, 200 * SECOND  # results of a stream are a minute apart
FEED = two_lines(9, 450)


def waiting_lab(wait: int = WAIT) -> Lab:
    given = laboratory()
    return given.model_copy(update={"feed": given.feed.model_copy(update={"reorder_seconds": wait / SECOND})})


def arrivals(feed: Sequence[Result], seed: int, delay: int = LONG) -> list[tuple[int, Result]]:
    """Each result arrives at most `delay` after its time, in whatever order that makes."""
    chance = random.Random(seed)
    return sorted(((one.time + chance.randint(0, delay), one) for one in feed), key=lambda pair: pair[0])


def run(arrived: Sequence[tuple[int, Result]], lab: Lab, cuts: Sequence[int] = (), batch: int = 1) -> Kept:
    """A live run, restarted at the cuts; in the end the clock goes on until nothing waits."""
    kept, waiting = Kept(), [""]
    live = Live(lab, every_line(), "sha")

    def keep(made: Batch) -> None:
        kept.keep(made)
        waiting[0] = made.positions.get("waiting", waiting[0])

    for first in range(0, len(arrived), batch):
        if first in cuts:
            live = Live(lab, every_line(), "sha")
            live.go_on(kept.states.values(), kept.newest, kept.recent, kept.events, kept.clock, [], waiting[0])
        chunks = [Chunk("feed", 1, [one], str(at), arrived=at) for at, one in arrived[first : first + batch]]
        keep(live.take(chunks, Earlier()))
    keep(live.tick(arrived[-1][0] + LONG, Earlier()))
    assert len(live.reorder) == 0
    return kept


def what_counts(kept: Kept) -> list[Any]:
    states = {key: one.state for key, one in kept.states.items()}
    by_stream = {name: [one for one in kept.results if one.stream == name] for name, _ in states}
    return [sorted(kept.alarms, key=lambda one: (one.stream, one.time)), states, by_stream]


IN_ORDER = run([(one.time, one) for one in sorted(FEED, key=lambda one: one.time)], laboratory())


@given(
    seed=st.integers(0, 10**6),
    cuts=st.sets(st.integers(1, len(FEED) - 1), max_size=5),
    batch=st.sampled_from([1, 3, 20]),
)
@settings(max_examples=25, deadline=None)
def test_any_order_of_arrival_within_the_wait_gives_what_the_order_of_measurement_gives(
    seed: int, cuts: set[int], batch: int
) -> None:
    kept = run(arrivals(FEED, seed), waiting_lab(LONG), sorted(cuts), batch)
    assert what_counts(kept) == what_counts(IN_ORDER)


def test_without_a_wait_another_order_of_arrival_gives_other_states() -> None:
    assert len(IN_ORDER.alarms) >= 4
    assert what_counts(run(arrivals(FEED, 1), laboratory())) != what_counts(IN_ORDER)


def left_out(batch: Batch) -> list[tuple[float, str]]:
    return [(one.result.value, one.left_out) for one in batch.results]


def test_what_was_measured_before_a_result_that_was_taken_comes_too_late() -> None:
    live = Live(waiting_lab(), every_line(), "")
    first, second, third = results([140, 141, 142])
    take = lambda one, at: live.take([Chunk("feed", 1, [one], "", arrived=at)], Earlier())  # noqa: E731
    assert left_out(take(first, START)) == []
    assert left_out(take(third, third.time)) == [(140.0, "")]
    assert left_out(live.tick(third.time + WAIT, Earlier())) == [(142.0, "")]
    late = take(second, third.time + WAIT + 1)
    assert left_out(late) == [] and left_out(live.tick(third.time + 2 * WAIT + 1, Earlier())) == [(141.0, "too late")]


def test_a_time_far_ahead_shuts_out_nothing() -> None:
    live = Live(waiting_lab(), every_line(), "")
    some = results([140.0] * 8)
    some[2] = replace(some[2], time=START + 10**13)
    batches = [
        live.take([Chunk("feed", 1, [one], "", arrived=START + n * MINUTE)], Earlier()) for n, one in enumerate(some)
    ]
    batches.append(live.tick(START + 20 * MINUTE, Earlier()))
    assert [reason for batch in batches for _, reason in left_out(batch)] == [""] * 8


def test_no_more_than_a_bounded_number_waits(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(reorder, "MOST", 5)
    live = Live(waiting_lab(), every_line(), "")
    batch = live.take([Chunk("feed", 1, results([140.0] * 7), "", arrived=START)], Earlier())
    assert len(live.reorder) == 5 and len(batch.results) == 2
    assert {remark.text for _, remark in batch.remarks} == {reorder.FULL}


def test_replayed_results_do_not_wait() -> None:
    live = Live(waiting_lab(), every_line(), "")
    assert len(live.take([Chunk("feed", 1, results([140.0] * 7), "")], Earlier()).results) == 7


def test_a_result_that_comes_twice_while_it_waits_counts_once_and_the_account_adds_up() -> None:
    live, one = Live(waiting_lab(), every_line(), ""), results([140.0])[0]
    first = live.take([Chunk("feed", 1, [one, one], "", arrived=START)], Earlier())
    second = live.tick(START + WAIT, Earlier())
    assert len(second.results) == 1 and second.tallies == {"duplicate": 1}
    assert sum(first.delivered.values()) == 0 and second.delivered == {"waiting": 2}


def test_when_the_clock_goes_back_nothing_waits_for_it_to_come_again() -> None:
    buffer = ReorderBuffer(WAIT)
    buffer.put(results([140.0])[0], Edition("feed", 1), START)
    assert not buffer.over(START + WAIT - 1)
    assert len(buffer.over(START - 3600 * SECOND)) == 1
    assert buffer.take(START + WAIT)[0].result.stream == SODIUM and len(buffer) == 0
