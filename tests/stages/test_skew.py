"""The clock of an analyser against the arrival of its results."""

from pbm.records.notice import Notice
from pbm.stages.skew import SEEN, ClockSkew

MINUTE = 60_000_000
NOW = 1_930_000_000_000_000


def heard(skew: ClockSkew, lags: list[float], analyser: str = "line-2") -> list[Notice]:
    """Results that arrive so many minutes after their times."""
    for lag in lags:
        skew.hear(analyser, NOW - round(lag * MINUTE), NOW)
    return skew.judge(NOW)


def test_results_that_come_soon_after_their_times_say_nothing() -> None:
    assert not heard(ClockSkew(), [0.1, 3.0, 12.0, 40.0] * SEEN)


def test_a_clock_that_is_ahead_is_told_and_the_notice_ends_when_it_is_set() -> None:
    skew = ClockSkew()
    (begun,) = heard(skew, [-12.0, -12.5] * SEEN)
    assert (
        begun.text == "times on results of line-2 lie 12 min ahead of the computer's clock" and begun.closed_at is None
    )
    assert not heard(skew, [-12.0] * SEEN), "told once"
    (ended,) = heard(skew, [0.5])
    assert ended.closed_at == NOW and ended.text.endswith("times fit again")


def test_a_clock_that_was_not_changed_with_the_others_is_told() -> None:
    (begun,) = heard(ClockSkew(), [61.0, 64.0] * SEEN)
    assert begun.text == "results of line-2 come 61 min or more after their times: held up, or its clock is behind"


def test_single_results_with_old_or_future_times_say_nothing() -> None:
    assert not heard(ClockSkew(), ([2.0] * 5 + [900.0, -900.0]) * SEEN)
    assert not heard(ClockSkew(), [90.0] * (SEEN - 1)), "too few to tell"


def test_analysers_are_judged_one_by_one_and_go_on_after_a_restart() -> None:
    skew = ClockSkew()
    both = heard(skew, [-5.0] * SEEN) + heard(skew, [1.0] * SEEN, "line-1")
    assert [one.analyser for one in both] == ["line-2"]
    again = ClockSkew()
    again.go_on(both)
    assert not heard(again, [-5.0] * SEEN)
    (ended,) = heard(again, [1.0])
    assert ended.time == both[0].time and ended.closed_at == NOW
