"""Which results count on the live feed, and in which order."""

import itertools
from collections.abc import Sequence
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.errors import PlanError
from pbm.records.plan import BaselinePlan
from pbm.records.reading import Chunk, SetAside
from pbm.records.result import Result
from pbm.records.snapshot import Batch, Earlier
from pbm.records.stream import StreamName
from pbm.stages.live import NEWEST, SLACK, Live
from tests.live_laboratory import (
    MINUTE,
    SODIUM,
    START,
    TSH,
    every_line,
    ewma,
    laboratory,
    plan,
    results,
    shifted_values,
    two_lines,
)

LAB = laboratory()
HOUR = 60 * MINUTE


def live() -> Live:
    return Live(LAB, plan(sodium_line_1=[ewma()]), "sha")


def chunk(items: Sequence[Result | SetAside], source: str = "feed", edition: int = 1) -> Chunk:
    return Chunk(source, edition, items, "position")


def take(watch: Live, *chunks: Sequence[Result | SetAside], earlier: Earlier | None = None) -> Batch:
    return watch.take([chunk(items) for items in chunks], earlier or Earlier())


def test_a_result_sent_twice_counts_once() -> None:
    one, other = results([140, 141])
    batch = take(live(), [one, one, other], [one])
    assert [kept.result for kept in batch.results] == [one, other]
    assert batch.tallies == {"duplicate": 2}
    assert batch.snapshots[0].taken == 2


def test_wrong_dates_now_and_then_never_shut_out_what_follows() -> None:
    some = results([140.0] * 300)
    wrong = {place: replace(some[place], time=some[place].time + 400 * 24 * HOUR) for place in range(20, 300, 25)}
    batch = take(live(), [wrong.get(place, one) for place, one in enumerate(some)])
    assert len(wrong) > 2 * NEWEST and {kept.left_out for kept in batch.results} == {""}


def test_a_further_run_of_a_specimen_within_a_day_is_kept_but_no_monitor_takes_it() -> None:
    first = results([140])[0]
    rerun = replace(first, time=first.time + HOUR, value=155.0)
    next_day = replace(first, time=first.time + 25 * HOUR, value=143.0)
    watch = live()
    batch = take(watch, [first, rerun, rerun, next_day])
    assert [(kept.result.value, kept.left_out) for kept in batch.results] == [
        (140.0, ""),
        (155.0, "rerun of the specimen"),
        (143.0, ""),
    ]
    assert batch.tallies == {"rerun of the specimen": 1, "duplicate": 1}
    assert batch.snapshots[0].taken == 2


def test_sex_and_age_are_kept_only_where_a_monitor_adjusts_for_them() -> None:
    one = replace(results([140])[0], sex="F", age="60-74")
    hours = (0.0,) * 168
    for effects, kept in (
        ({}, ("", "")),
        ({"sexes": {"F": 0.1}}, ("F", "")),
        ({"ages": {"60-74": 0.1}}, ("", "60-74")),
        ({"sexes": {"F": 0.1}, "ages": {"60-74": 0.1}}, ("F", "60-74")),
    ):
        adjusted = ewma().model_copy(update={"baseline": BaselinePlan(wards={}, hours=hours, **effects)})
        watch = Live(LAB, plan(sodium_line_1=[ewma(), adjusted]), "sha")
        found = [kept.result for kept in take(watch, [one, replace(one, stream=TSH)]).results]
        assert [(result.sex, result.age) for result in found] == [kept, ("", "")]


def test_the_same_specimen_in_another_stream_is_no_rerun() -> None:
    first = results([140])[0]
    batch = take(live(), [first, replace(first, stream=TSH, value=1.5)])
    assert [kept.left_out for kept in batch.results] == ["", ""]


def test_like_results_without_a_specimen_are_two_patients_in_one_edition_and_copies_in_another() -> None:
    bare = replace(results([140])[0], specimen="")
    batch = live().take([chunk([bare, bare]), chunk([bare, bare], edition=2), chunk([bare], source="other")], Earlier())
    assert len(batch.results) == 2
    assert batch.tallies == {"duplicate": 3}


def test_what_the_store_holds_already_is_recognised() -> None:
    one, other = results([140, 141])
    earlier = Earlier(runs={(SODIUM, one.specimen): {(one.time, one.value, 0): True}})
    batch = take(live(), [one, replace(one, time=one.time + MINUTE), other], earlier=earlier)
    assert [(kept.result.value, kept.left_out) for kept in batch.results] == [
        (140.0, "rerun of the specimen"),
        (141.0, ""),
    ]


def test_a_result_that_comes_too_late_is_kept_but_no_monitor_takes_it() -> None:
    some = results([140] * 10)
    late = replace(results([170], first=100)[0], time=some[-NEWEST].time - SLACK - 1)
    swapped = replace(results([139], first=101)[0], time=some[-NEWEST].time - SLACK)
    batch = take(live(), [*some, late, swapped])
    assert [kept.left_out for kept in batch.results[10:]] == ["too late", ""]
    assert batch.tallies == {"too late": 1}
    assert batch.snapshots[0].taken == 11


def test_a_few_times_in_the_future_do_not_shut_out_what_follows() -> None:
    some = results([140] * 40)
    ahead = [replace(one, time=one.time + 400 * 24 * HOUR) for one in results([141] * (NEWEST - 1), first=100)]
    batch = take(live(), [*some[:20], *ahead, *some[20:]])
    assert "too late" not in batch.tallies
    assert batch.snapshots[0].taken == 40 + len(ahead)


def test_results_of_a_stream_without_monitor_are_kept() -> None:
    unknown = StreamName("sodium", "line-9")
    batch = take(live(), [replace(one, stream=unknown) for one in results([140, 141])])
    assert [kept.left_out for kept in batch.results] == ["", ""]
    assert not batch.snapshots


def test_what_was_set_aside_is_counted_by_reason_and_kept_with_its_place() -> None:
    batch = take(
        live(),
        [SetAside(3, "unknown test", "XYZ"), SetAside(4, "unknown test", "ABC"), SetAside(9, "not a number", "HEM")],
    )
    assert batch.tallies == {"unknown test": 2, "not a number": 1}
    assert [(source, item.place) for source, item in batch.set_aside] == [("feed", 3), ("feed", 4), ("feed", 9)]


def test_the_position_of_each_feed_is_that_of_its_last_chunk() -> None:
    chunks = [Chunk("a", 1, [], "1"), Chunk("b", 1, [], "7"), Chunk("a", 1, [], "2")]
    assert live().take(chunks, Earlier()).positions == {"a": "2", "b": "7"}


@settings(max_examples=30, deadline=None)
@given(st.lists(st.integers(1, 90), max_size=8))
def test_how_results_are_cut_into_batches_changes_nothing(cuts: list[int]) -> None:
    feed = two_lines(5, 300)
    feed = feed + feed[20:50] + [replace(feed[200], time=feed[200].time + MINUTE)]
    whole, pieces = Live(LAB, every_line(), "sha"), Live(LAB, every_line(), "sha")
    expected = whole.take([chunk(list(feed))], Earlier())
    edges = [0, *itertools.accumulate(cuts), len(feed)]
    earlier, kept, alarms = Earlier(), [], []
    for start, end in itertools.pairwise(edges):
        batch = pieces.take([chunk(list(feed[start:end]))], earlier)
        alarms += [alarm for _, alarm in batch.alarms]
        kept += list(batch.results)
    assert kept == expected.results
    assert alarms == [alarm for _, alarm in expected.alarms]
    assert [one.to_bytes() for one in pieces.monitors] == [one.to_bytes() for one in whole.monitors]


def test_a_plan_for_an_analyte_that_the_laboratory_does_not_describe_is_refused() -> None:
    other = plan(sodium_line_1=[ewma()])
    renamed = other.model_copy(update={"streams": {"chloride@line-1": other.streams[str(SODIUM)]}})
    with pytest.raises(PlanError, match=r'chloride@line-1, and lab\.toml has no analyte "chloride"'):
        Live(LAB, renamed, "")


def test_a_plan_in_another_unit_is_refused() -> None:
    other = plan(sodium_line_1=[ewma()])
    stream = other.streams[str(SODIUM)].model_copy(update={"unit": "mg/dL"})
    with pytest.raises(PlanError, match=r"sodium@line-1 in mg/dL.*its unit is mmol/L"):
        Live(LAB, other.model_copy(update={"streams": {str(SODIUM): stream}}), "")


def test_a_monitor_whose_settings_changed_begins_afresh_and_the_others_go_on() -> None:
    before = Live(LAB, plan(sodium_line_1=[ewma(), ewma(half_width=2.0)]), "old")
    batch = take(before, list(results(shifted_values(1, 50, {}))))
    after = Live(LAB, plan(sodium_line_1=[ewma(half_width=3.0), ewma(slope=0.5)]), "new")
    kept_results = [kept.result for kept in batch.results]
    going_on = after.go_on(batch.snapshots, batch.newest, lambda name, count: kept_results[-count:])
    assert [one.index for one in going_on] == [1]
    assert [one.taken for one in after.monitors] == [0, 50]
    assert after.streams[SODIUM].newest == [START + n * MINUTE for n in range(45, 50)]


def test_where_repeats_are_limited_a_patient_counts_once_in_so_many_hours() -> None:
    watch = Live(LAB, plan(tsh_line_1=[ewma(1.0, 0.5)]), "sha")
    some = [replace(one, patient="token") for one in results([1, 2, 3, 4], TSH)]
    hours = (0, 11, 12, 25)
    visits = [replace(one, time=START + hour * HOUR + (hour == 25)) for one, hour in zip(some, hours, strict=True)]
    other = replace(visits[1], patient="another", specimen="31-9")
    batch = take(watch, [*visits, other])
    assert [kept.left_out for kept in batch.results] == ["", "same patient again", "same patient again", "", ""]
    known = Earlier(visits={(TSH, "token"): [START]})
    assert take(watch, visits[1:2], earlier=known).tallies == {"same patient again": 1}


def test_where_repeats_are_not_limited_every_result_of_a_patient_counts() -> None:
    batch = take(live(), [replace(one, patient="") for one in results([140, 141])])
    assert [kept.left_out for kept in batch.results] == ["", ""]
