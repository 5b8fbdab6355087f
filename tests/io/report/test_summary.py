"""The summary sorts streams by what a year saves, answers in a few sentences, and promises nothing that was not found."""

import pytest

from pbm.io.report import summary
from pbm.records.appraisal import StreamAppraisal
from pbm.records.figures import Figure
from tests.io.report import sample, variants
from tests.io.report.variants import judged_of, with_judged


def with_year(name: str, alone: float, beside: float) -> StreamAppraisal:
    judged = judged_of(sample.SODIUM)
    year = judged.yearly.model_copy(update={"unreliable": sample.both_ways(alone, beside)})
    return with_judged(sample.SODIUM, yearly=year).model_copy(update={"stream": name})


def test_streams_stand_by_gain_and_those_without_a_monitor_last() -> None:
    given = sample.appraisal(
        sample.TSH, with_year("small", 10, 9), with_year("worse", 5, 6), with_year("large", 100, 60)
    )
    rows = summary.summary_rows(given)
    assert [row.stream.stream for row in rows] == ["large", "small", "worse", "tsh@immuno"]
    assert [row.anchor for row in rows] == ["stream-4", "stream-2", "stream-3", "stream-1"]


def test_the_bar_shows_what_is_left_and_never_leaves_its_frame() -> None:
    given = sample.appraisal(with_year("a", 100, 25), with_year("b", 10, 30), with_year("c", 0, 0))
    left = {row.stream.stream: row.left for row in summary.summary_rows(given)}
    assert left == {"a": 25, "b": 100, "c": 100}


def test_the_greatest_gain_is_told_only_where_there_is_one() -> None:
    assert "large" in summary.in_short(sample.appraisal(with_year("large", 100, 60)))[-1]
    assert not any("greatest gain" in one for one in summary.in_short(sample.appraisal(with_year("worse", 5, 6))))


def test_verdicts_are_counted() -> None:
    assert summary.in_short(sample.THREE)[0] == (
        "A monitor on each of 4 streams would be: 2 useful, 1 marginal, 1 not useful here."
    )


def test_a_laboratory_without_a_monitor_is_told_so() -> None:
    told = summary.in_short(sample.appraisal(sample.TSH, variants.unwatched(sample.ALBUMIN)))
    assert len(told) == 2
    assert "No stream has a monitor" in told[1]


def test_the_year_is_said_to_rest_on_an_assumption() -> None:
    (year,) = (one for one in summary.in_short(sample.THREE) if one.startswith("In a year"))
    assert "5 error conditions on each stream (an assumption, not an estimate)" in year
    bench = sample.THREE.bench
    assert f"{bench.unreliable.alone.value:.0f} unreliable results" in year


def test_rates_that_differ_between_streams_are_told_as_a_range() -> None:
    judged = judged_of(sample.SODIUM)
    other = with_judged(sample.SODIUM, yearly=judged.yearly.model_copy(update={"per_year": 12.0}))
    assert summary.rates(sample.appraisal(sample.SODIUM, other)).startswith("5 to 12 error conditions")


@pytest.mark.parametrize(("kept", "told"), [(True, "together: kept."), (False, "together: NOT kept.")])
def test_the_bench_s_alarms_a_month_stand_beside_what_the_budgets_allow(kept: bool, told: str) -> None:
    bench = sample.THREE.bench.model_copy(
        update={"a_month": Figure(value=30, low=22.6, high=39.1), "allowed_a_month": 21, "kept": kept}
    )
    (month,) = (
        one
        for one in summary.in_short(sample.THREE.model_copy(update={"bench": bench}))
        if one.startswith("The staff would see")
    )
    assert "30.0 false alarms a month on the whole bench (22.6 to 39.1); the budgets allow 21.0" in month
    assert told in month


def test_the_days_are_those_on_which_something_was_judged() -> None:
    never = sample.TSH.model_copy(update={"first_day": "1999-01-01"})
    told = summary.judged_on(sample.appraisal(sample.SODIUM, never))
    assert "2031-02-10 to 2031-03-21" in told
    assert summary.judged_on(sample.appraisal(never)) == ""


def test_a_budget_is_told_for_a_month() -> None:
    alarms = judged_of(sample.SODIUM).false_alarms
    assert alarms is not None
    assert summary.allowed_a_month(alarms) == pytest.approx(1)
    assert summary.allowed_a_month(alarms.model_copy(update={"days": 0})) == 0
