"""The first judgement: where its verdicts change, and how the reason reads."""

import pytest

from pbm.records.survey import Distribution, Histogram, Needed, Performance, Volume
from pbm.stages.survey_words import first_judgement

DISTRIBUTION = Distribution(
    lowest=1, p2_5=1, p25=2, median=3, p75=4, p97_5=5, highest=5, mean=3, spread=1, skewness=0, distinct=5, censored_below=0,
    censored_above=0, not_positive=0, step_found=1, step_stated=1, histogram=Histogram(edges=(0, 6), counts=(9,), below=0, above=0),
)  # fmt: skip
PERFORMANCE = Performance(allowable_error=0.45, analytic_sd=0.1, sigma=4.5, patient_to_analytic=10)


def volume(results: int = 10_000, days: int = 100, per_day: float = 100.0) -> Volume:
    return Volume(
        results=results, first_day="2031-01-06", last_day="2031-04-15", days=days, days_with_results=days, per_day=per_day,
        by_hour_of_week=(1.0,) * 168, by_weekday=(24.0,) * 7,
    )  # fmt: skip


def needed(one: float) -> Needed:
    return Needed(half=4 * one, one=one, two=one / 3, baseline=False)


@pytest.mark.parametrize(
    "results, verdict",
    [
        (1, "useful"),
        (50, "useful"),
        (51, "marginal"),
        (100, "marginal"),
        (101, "not useful here"),
        (1e9, "not useful here"),
    ],
)
def test_the_verdict_changes_at_half_a_day_and_at_a_day(results: float, verdict: str):
    assert first_judgement(volume(), DISTRIBUTION, PERFORMANCE, needed(results), "x").verdict == verdict


def test_the_reason_names_results_size_and_volume():
    told = first_judgement(volume(per_day=76), DISTRIBUTION, PERFORMANCE, needed(870), "mIU/L").reason
    assert told == "needs about 870 results to see 1 TEa (0.45 mIU/L), the line makes 76 a day"


def test_too_little_history_comes_before_every_other_reason():
    told = first_judgement(volume(results=999), DISTRIBUTION, PERFORMANCE, needed(1), "x")
    assert (told.verdict, told.reason.split(" are ")[0]) == ("not useful here", "999 results on 100 days")


def test_a_stream_in_which_nothing_moves_says_why():
    nothing = first_judgement(volume(), DISTRIBUTION, PERFORMANCE, None, "x")
    assert nothing.reason == "a shift of 1 TEa moves no mean of these results"
