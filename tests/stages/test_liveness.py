"""Quiet analysers and streams, on a clock that is handed in and may go back."""

import itertools
import random
from collections.abc import Sequence
from dataclasses import replace
from datetime import datetime

import pytest

from pbm.methods.silence import silence_ends
from pbm.records.notice import Notice
from pbm.records.plan import Plan
from pbm.records.rhythm import Rhythm
from pbm.records.stream import StreamName
from pbm.stages.liveness import GRACE, Liveness, duration
from tests.live_laboratory import SODIUM, SODIUM_2, TSH, ewma, laboratory, plan

ZONE = laboratory().laboratory.zone
MINUTE, HOUR = 60_000_000, 3_600_000_000
EVEN = Rhythm(quiet_at=10.0, false_per_day=0.011, by_hour=(20.0,) * 168)  # 30 minutes
ANALYSER = Rhythm(quiet_at=12.0, false_per_day=0.011, by_hour=(60.0,) * 168)  # 12 minutes
BY_DAY = Rhythm(
    quiet_at=10.0, false_per_day=0.011, by_hour=tuple(20.0 if 8 <= h % 24 < 18 else 0.0 for h in range(168))
)


def at(text: str) -> int:
    return round(datetime.fromisoformat(text).replace(tzinfo=ZONE).timestamp()) * 1_000_000


T0 = at("2031-03-03 10:00")


def watched(stream: Rhythm | None = EVEN, analyser: Rhythm | None = ANALYSER) -> Plan:
    given = plan(sodium_line_1=[ewma()], sodium_line_2=[ewma()], tsh_line_1=[])
    streams = {name: one.model_copy(update={"rhythm": stream}) for name, one in given.streams.items()}
    analysers = {"line-1": analyser, "line-2": analyser} if analyser else {}
    return given.model_copy(update={"streams": streams, "analysers": analysers})


def replayed(results: Sequence[tuple[StreamName, int]], given: Plan | None = None) -> tuple[Liveness, list[Notice]]:
    liveness = Liveness(given or watched(), ZONE)
    for name, time in results:
        liveness.hear(name, time)
    return liveness, liveness.said()


def every(minutes: float, until: int, name: StreamName = SODIUM, start: int = T0) -> list[tuple[StreamName, int]]:
    return [(name, time) for time in range(start, until, round(minutes * MINUTE))]


def merged(*feeds: Sequence[tuple[StreamName, int]]) -> list[tuple[StreamName, int]]:
    return sorted(itertools.chain(*feeds), key=lambda one: one[1])


def test_an_analyser_that_falls_silent_is_told_once_and_its_notice_ends_with_the_next_result() -> None:
    other = every(3, T0 + 3 * HOUR, SODIUM_2)
    both = merged(every(3, T0 + HOUR), every(3, T0 + HOUR, TSH), other, [(SODIUM, T0 + 2 * HOUR)])
    liveness, said = replayed(both)
    last = T0 + 57 * MINUTE
    begun = Notice(last + 12 * MINUTE, "quiet", "", "line-1", "line-1 quiet for 12 min, 12 expected")
    ended = replace(begun, text=f"{begun.text}; results again after 63 min", closed_at=T0 + 2 * HOUR)
    # Of the analyser's streams TSH stays silent: its own time runs from the analyser's return.
    tsh = T0 + 2 * HOUR
    assert said[:2] == [begun, ended]
    assert [(one.analyte, one.analyser, one.time) for one in said[2:]] == [("", "line-1", tsh + 12 * MINUTE)]
    assert liveness.is_quiet(TSH) and liveness.is_quiet(SODIUM) and not liveness.is_quiet(SODIUM_2)


def test_a_stream_may_be_quiet_while_its_analyser_is_not() -> None:
    _, said = replayed(merged(every(1, T0 + 2 * HOUR), every(1, T0 + HOUR, TSH), every(1, T0 + 2 * HOUR, SODIUM_2)))
    assert [(one.analyte, one.analyser, one.text) for one in said] == [
        ("tsh", "line-1", "tsh@line-1 quiet for 30 min, 10 expected")
    ]
    assert said[0].time == T0 + 59 * MINUTE + 30 * MINUTE


def test_what_never_brought_a_result_is_quiet_too() -> None:
    _, said = replayed(every(1, T0 + HOUR))
    assert ("", "line-2", T0 + 12 * MINUTE) in [(one.analyte, one.analyser, one.time) for one in said]


def test_nights_in_which_nothing_is_expected_are_no_silence() -> None:
    friday = at("2031-03-07 17:59")
    given = watched(BY_DAY, BY_DAY)
    liveness, said = replayed([(SODIUM, friday), (SODIUM_2, friday), (TSH, friday)], given)
    liveness.move(at("2031-03-08 08:28"))
    assert not liveness.said() + said
    liveness.move(at("2031-03-08 08:40"))
    quiet = liveness.said()
    assert [(one.analyser, one.text) for one in quiet] == [
        ("line-1", "line-1 quiet for 14 h 30 min, 10 expected"),
        ("line-2", "line-2 quiet for 14 h 30 min, 10 expected"),
    ]
    assert {datetime.fromtimestamp(one.time / 1e6, ZONE).strftime("%H:%M") for one in quiet} == {"08:29"}


@pytest.mark.parametrize(
    ("day", "earlier", "length"),
    [("2031-03-30", "2031-03-29", "13 h 30 min"), ("2031-10-26", "2031-10-25", "15 h 30 min")],
)
def test_a_change_of_the_clocks_neither_hides_nor_makes_a_silence(day: str, earlier: str, length: str) -> None:
    """From 18:00 nothing is expected until 08:00: by the wall, whichever way the night's clocks were changed."""
    last = at(f"{earlier} 18:00")
    liveness, said = replayed([(SODIUM, last), (SODIUM_2, last), (TSH, last)], watched(BY_DAY, BY_DAY))
    liveness.move(at(f"{day} 08:29"))
    assert not liveness.said() + said
    liveness.move(at(f"{day} 09:00"))
    assert [one.text for one in liveness.said()] == [f"line-{n} quiet for {length}, 10 expected" for n in (1, 2)]


def busy_feed(seed: int) -> list[tuple[StreamName, int]]:
    """Three streams with long and short gaps."""
    chance, feed = random.Random(seed), []
    for name in (SODIUM, SODIUM_2, TSH):
        time = T0
        while time < T0 + 40 * HOUR:
            time += round(chance.expovariate(1 / (3 * MINUTE)))
            time += chance.choice([0] * 80 + [20 * MINUTE, 2 * HOUR])
            feed.append((name, time))
    return merged(feed)


@pytest.mark.parametrize("seed", range(5))
def test_stopped_anywhere_and_looked_at_however_often_it_says_the_same(seed: int) -> None:
    feed = busy_feed(seed)
    _, whole = replayed(feed)
    assert sum(one.closed_at is None for one in whole) > 10
    for cut in range(0, len(feed), 97):
        first = Liveness(watched(), ZONE)
        for name, time in feed[:cut]:
            first.move(time - 1)
            first.hear(name, time)
        said, second = first.said(), Liveness(watched(), ZONE)
        second.go_on(first.state, [one for one in latest(said) if one.closed_at is None])
        for name, time in feed[cut:]:
            second.hear(name, time)
        assert said + second.said() == whole


def latest(said: Sequence[Notice]) -> list[Notice]:
    """As the store keeps them: one row for each notice."""
    return list({(one.time, one.kind, one.analyte, one.analyser): one for one in said}.values())


@pytest.mark.parametrize("seed", range(5))
def test_a_notice_begins_where_a_look_at_every_gap_finds_one(seed: int) -> None:
    feed = busy_feed(seed)
    _, said = replayed(feed, watched(stream=None))
    expected = []
    for analyser in ("line-1", "line-2"):
        times = [T0 if not feed else feed[0][1], *(time for name, time in feed if name.analyser == analyser)]
        for before, after in itertools.pairwise(times):
            due = silence_ends(before, ANALYSER.quiet_at, ANALYSER.by_hour, ZONE)
            if due is not None and due <= after:
                expected.append((due, analyser, after))
    ended = [(one.time, one.analyser, one.closed_at) for one in said if one.closed_at is not None]
    still = {(one.time, one.analyser) for one in said} - {one[:2] for one in ended}
    assert sorted(ended) == sorted(expected)
    assert len(still) <= 2


# On the clock of the computer


def ticking(liveness: Liveness, begin: int, end: int, step: int = 5_000_000) -> list[Notice]:
    for now in range(begin, end, step):
        liveness.tick(now)
    return liveness.said()


def test_when_nothing_arrives_at_all_the_clock_alone_finds_it() -> None:
    liveness = Liveness(watched(), ZONE)
    ticking(liveness, T0, T0 + GRACE)
    liveness.hear(SODIUM, T0 + GRACE)
    assert [one.text for one in ticking(liveness, T0 + GRACE, T0 + 20 * MINUTE)] == [
        "line-2 quiet for 12 min, 12 expected",
        "line-1 quiet for 12 min, 12 expected",
    ]


@pytest.mark.parametrize("back", [5 * MINUTE, HOUR, 400 * 24 * HOUR])
def test_a_clock_that_goes_back_is_told_and_changes_no_silence(back: int) -> None:
    liveness = Liveness(watched(stream=None), ZONE)
    ticking(liveness, T0, T0 + 10 * MINUTE)
    for name in (SODIUM, SODIUM_2):
        liveness.hear(name, T0 + 10 * MINUTE)
    ticking(liveness, T0 + 10 * MINUTE, T0 + 15 * MINUTE)
    said = ticking(liveness, T0 + 15 * MINUTE - back, T0 + 30 * MINUTE - back)
    assert said[0].kind == "clock" and "clock went back by" in said[0].text
    quiet = [one for one in said if one.kind == "quiet"]
    assert [one.text for one in quiet] == [f"line-{n} quiet for 12 min, 12 expected" for n in (1, 2)]
    assert all(abs(one.time + back - (T0 + 22 * MINUTE)) <= 5_000_000 for one in quiet)


def test_small_corrections_of_the_clock_are_not_told() -> None:
    liveness = Liveness(watched(), ZONE)
    ticking(liveness, T0, T0 + MINUTE)
    liveness.tick(T0 + MINUTE - 6_000_000)
    assert not liveness.said()


def test_after_a_time_without_the_watch_what_waited_has_time_to_come_in() -> None:
    liveness = Liveness(watched(stream=None), ZONE)
    ticking(liveness, T0, T0 + MINUTE)
    woken = T0 + 8 * HOUR
    liveness.tick(woken)
    (told,) = liveness.said()
    assert told.kind == "clock" and "nothing was watched for 7 h 59 min" in told.text
    liveness.hear(SODIUM, woken + MINUTE)
    said = ticking(liveness, woken + MINUTE, woken + GRACE + MINUTE)
    assert [one.analyser for one in said] == ["line-2"], "line-1 had its results waiting, line-2 is silent indeed"


def test_at_a_start_a_silence_of_before_is_judged_after_a_while() -> None:
    before = Liveness(watched(stream=None), ZONE)
    ticking(before, T0, T0 + MINUTE)
    after = Liveness(watched(stream=None), ZONE)
    after.go_on(before.state, [])
    start = T0 + 5 * HOUR
    assert not ticking(after, start, start + GRACE)
    assert [one.kind for one in ticking(after, start + GRACE, start + GRACE + MINUTE)] == ["quiet", "quiet"]


def test_a_notice_of_what_a_new_plan_no_longer_watches_is_closed() -> None:
    quiet = Notice(T0, "quiet", "", "line-9", "line-9 quiet for 12 min, 12 expected")
    liveness = Liveness(watched(), ZONE)
    liveness.go_on("", [quiet])
    (said,) = liveness.said()
    assert said.closed_at is not None and said.text.endswith("no longer watched")


@pytest.mark.parametrize(
    ("microseconds", "words"),
    [(45_000_000, "45 s"), (45 * MINUTE, "45 min"), (190 * MINUTE, "3 h 10 min"), (50 * HOUR, "2 days")],
)
def test_lengths_of_time_in_words(microseconds: int, words: str) -> None:
    assert duration(microseconds) == words


# The clock of a replay


def believed(liveness: Liveness, results: Sequence[tuple[StreamName, int]]) -> list[Notice]:
    for name, time in results:
        liveness.hear(name, liveness.believed(time))
    return liveness.said()


def test_a_wrong_date_in_a_replay_is_not_the_clock() -> None:
    feed = merged(every(1, T0 + HOUR), every(1, T0 + HOUR, SODIUM_2), every(1, T0 + HOUR, TSH))
    for place in (20, 21, 90):
        feed[place] = (feed[place][0], feed[place][1] + 400 * 24 * HOUR)
    assert not believed(Liveness(watched(), ZONE), feed)


def test_a_replay_goes_on_after_days_without_results_and_through_a_restart() -> None:
    later = T0 + 10 * 24 * HOUR
    feed = [*every(1, T0 + HOUR), *every(1, later + HOUR, start=later)]
    whole = Liveness(watched(), ZONE)
    said = believed(whole, feed)
    ended = [one for one in said if one.closed_at is not None and one.analyser == "line-1"]
    assert ended and ended[0].closed_at == later + 4 * MINUTE, "the fifth result in a row makes it sure"
    for cut in range(58, 68):
        first = Liveness(watched(), ZONE)
        before = believed(first, feed[:cut])
        second = Liveness(watched(), ZONE)
        second.go_on(first.state, [one for one in latest(before) if one.closed_at is None])
        assert before + believed(second, feed[cut:]) == said
