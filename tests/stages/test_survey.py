"""The survey of one stream: true figures on streams made for it, and words, never a failure, for the worst that a history holds."""

import numpy as np
import pytest

from pbm.errors import InputError
from pbm.methods.clock_time import MICROSECONDS_PER_DAY, MICROSECONDS_PER_HOUR
from pbm.methods.run_length import results_needed
from pbm.records.laboratory import Lab
from pbm.records.stream import StreamHistory, StreamName
from pbm.records.survey import StreamSurvey
from pbm.stages.survey import survey_stream

BEGIN = 22_285 * MICROSECONDS_PER_DAY + MICROSECONDS_PER_HOUR  # Monday 2031-01-06, 00:00 in the Azores
LAB = Lab.model_validate(
    {
        "laboratory": {"name": "Tern Bay District Laboratory", "timezone": "Atlantic/Azores"},
        "extract": {"time": "t", "analyte": "a", "value": "v"},
        "analytes": {
            "sodium": {
                "unit": "mmol/L",
                "step": 1,
                "allowable_error": {"absolute": 4},
                "analytic_sd": {"absolute": 0.9},
            },
            "tsh": {
                "unit": "mIU/L",
                "step": 0.01,
                "allowable_error": {"percent": 20},
                "analytic_sd": {"cv_percent": 3},
            },
        },
    }
)


def surveyed(
    x: np.ndarray,
    days: float = 120,
    analyte: str = "sodium",
    censor: np.ndarray | int = 0,
    time: np.ndarray | None = None,
    patient: np.ndarray | None = None,
) -> StreamSurvey:
    n = len(x)
    when = (
        BEGIN + np.linspace(0, days * MICROSECONDS_PER_DAY - MICROSECONDS_PER_HOUR - 1, n).astype(np.int64)
        if time is None
        else time
    )
    words = np.full(n, "", dtype=object)
    history = StreamHistory(
        StreamName(analyte, "line-1"),
        when,
        x.astype(float),
        np.broadcast_to(censor, n).astype(np.int8),
        words,
        words,
        words,
        words,
    )
    return survey_stream(history, np.full(n, -1) if patient is None else patient, LAB, 1)


def sodium(n: int, seed: int = 1) -> np.ndarray:
    return np.rint(np.random.default_rng(seed).normal(139, 3.5, n))


def shorts(survey: StreamSurvey) -> list[str]:
    return [odd.short for odd in survey.oddities]


def test_sodium_at_350_a_day_is_useful_and_its_figures_are_true():
    found = surveyed(sodium(42_000))
    assert found.verdict == "useful"
    assert found.reason.startswith("needs about ")
    assert found.reason.endswith("results to see 1 TEa (4 mmol/L), the line makes 350 a day")
    assert found.needed is not None
    x = sodium(42_000)
    for size, told in ((0.5, found.needed.half), (1.0, found.needed.one), (2.0, found.needed.two)):
        assert told == pytest.approx(results_needed(size * 4 / x.std(), 350 * 30), rel=0.15)
    assert not found.needed.baseline
    assert found.volume.results == 42_000
    assert found.volume.per_day == pytest.approx(350, rel=0.02)
    assert sum(found.volume.by_weekday) == pytest.approx(7 * 350, rel=0.02)
    assert found.performance.sigma == pytest.approx(4 / 0.9)
    assert found.performance.patient_to_analytic == pytest.approx(3.5 / 0.9, rel=0.03)
    assert found.distribution.step_found == found.distribution.step_stated == 1
    assert abs(found.distribution.skewness or 1) < 0.05
    assert (
        sum(found.distribution.histogram.counts)
        + found.distribution.histogram.below
        + found.distribution.histogram.above
        == 42_000
    )
    assert found.dependence is not None
    assert found.dependence.effective == pytest.approx(42_000, rel=0.1)
    assert found.oddities == ()
    assert [month.month for month in found.months] == ["2031-01", "2031-02", "2031-03", "2031-04", "2031-05"]
    assert sum(month.results for month in found.months) == 42_000


def test_thyrotropin_at_76_a_day_is_not_useful_and_a_logarithm_is_suggested():
    x = np.round(np.random.default_rng(1).lognormal(0.6, 0.8, 76 * 120), 2)
    found = surveyed(x, analyte="tsh")
    assert found.verdict == "not useful here"
    assert found.reason.endswith("the line makes 76 a day")
    assert found.suggested is not None
    assert found.truncations[found.suggested].transform in ("log", "boxcox")


def test_between_them_lies_marginal():
    x = np.round(np.random.default_rng(1).lognormal(0.6, 0.8, 160 * 120), 2)
    assert surveyed(x, analyte="tsh").verdict == "marginal"


def test_ten_results_are_too_few():
    found = surveyed(sodium(10), days=1)
    assert found.verdict == "not useful here"
    assert "10 results on 1 day are too few" in found.reason
    assert found.needed is None
    assert found.truncations == ()


def test_a_single_result_is_surveyed():
    assert surveyed(np.array([140.0])).volume.results == 1


def test_one_distinct_value():
    found = surveyed(np.full(5000, 140.0))
    assert (found.verdict, found.reason) == ("not useful here", "all results are 140 mmol/L")
    assert found.distribution.skewness is None


def test_all_censored_at_one_limit_and_at_two():
    assert "all results are 5 mmol/L" in surveyed(np.full(5000, 5.0), censor=-1).reason
    two = surveyed(np.where(np.arange(5000) % 3 == 0, 5.0, 200.0), censor=np.where(np.arange(5000) % 3 == 0, -1, 1))
    assert "100% of the results are censored" in two.reason
    assert "censored 100%" in shorts(two)


def test_weeks_without_results_are_told_and_do_not_lower_the_rates_of_the_hours():
    x, n = sodium(20_000), 20_000
    time = BEGIN + np.linspace(0, 100 * MICROSECONDS_PER_DAY, n).astype(np.int64)
    time[n // 2 :] += 21 * MICROSECONDS_PER_DAY
    found = surveyed(x, time=time)
    (gap,) = found.gaps
    assert gap.hours == pytest.approx(21 * 24, rel=0.01)
    assert gap.expected == pytest.approx(21 * 200, rel=0.03)
    assert "gaps 1" in shorts(found)
    assert sum(found.volume.by_weekday) == pytest.approx(7 * 200, rel=0.02)
    assert found.daily_medians.count(None) in (20, 21)


def test_negative_values_and_zero_are_surveyed_without_a_logarithm():
    found = surveyed(np.rint(np.random.default_rng(1).normal(0, 4, 20_000)))
    assert "not positive" in shorts(found)
    assert {one.transform for one in found.truncations} == {"none"}
    percent = surveyed(np.round(np.random.default_rng(1).normal(0, 2, 20_000), 2), analyte="tsh")
    assert percent.performance.sigma is None or percent.performance.sigma > 0


def test_a_unit_slip_a_wrong_step_and_control_material_are_told():
    x = np.round(np.random.default_rng(1).lognormal(0.6, 0.3, 20_000), 1)
    x[12_000:14_000] = np.round(x[12_000:14_000] * 10, 1)
    x[5000:5030] = 2.0
    found = surveyed(x, analyte="tsh")
    assert {"UNIT SLIP", "step 0.1", "alike 1"} <= set(shorts(found))
    assert [slip.factor for slip in found.slips] == [10.0, 10.0]
    assert [slip.day for slip in found.slips] == ["2031-03-19", "2031-03-31"]
    assert 28 <= found.steady[0].results <= 34
    assert all(odd.words.endswith((".", "?")) for odd in found.oddities)


def test_a_spread_that_grows_is_told_with_how_often_limits_would_alarm():
    z = np.random.default_rng(1).normal(0, 1, 40_000) * np.linspace(14.5, 17.2, 40_000)
    found = surveyed(np.rint(150 + z))
    assert found.later_third is not None
    assert found.later_third.spread_before < 15.7
    assert found.later_third.spread_after > 16.4
    assert found.later_third.alarms_at_least > 1.5
    (later,) = [odd for odd in found.oddities if odd.short.startswith("later x")]
    assert later.grave
    assert "times as often as the budget allows" in later.words
    assert "(by month from 14." in later.words


def test_patients_are_counted_where_they_are_known():
    patient = np.arange(9000) // 3
    found = surveyed(sodium(9000), patient=np.where(np.arange(9000) < 4500, patient, -1))
    assert found.repeats is not None
    assert found.repeats.known == 0.5
    assert found.repeats.ever == pytest.approx(2 / 3)
    assert found.repeats.within_day == pytest.approx(2 / 3)
    assert any(short.startswith("repeats") for short in shorts(found))
    assert surveyed(sodium(9000)).repeats is None


def test_days_of_the_week_are_those_of_the_laboratorys_clock():
    """The Azores are an hour behind UTC in winter and keep its time in summer: Monday 00:30 UTC is Sunday 23:30 or Monday 00:30."""
    time = BEGIN + 7 * MICROSECONDS_PER_DAY * np.arange(200) - MICROSECONDS_PER_HOUR // 2
    rates = np.array(surveyed(sodium(200), time=time).volume.by_hour_of_week)
    assert set(np.flatnonzero(rates)) == {167, 0}


def test_an_analyte_that_lab_toml_does_not_know_is_an_error_that_says_so():
    words = np.full(1, "", dtype=object)
    history = StreamHistory(
        StreamName("chloride", "line-1"),
        np.array([BEGIN]),
        np.array([1.0]),
        np.zeros(1, dtype=np.int8),
        words,
        words,
        words,
        words,
    )
    with pytest.raises(InputError, match="no analyte chloride"):
        survey_stream(history, np.array([-1]), LAB, 1)


def test_the_same_seed_gives_the_same_survey():
    x = np.round(np.random.default_rng(1).lognormal(0.6, 0.8, 9000), 2)
    assert surveyed(x, analyte="tsh") == surveyed(x, analyte="tsh")


def test_a_result_that_no_method_measures_is_an_error_that_says_so():
    with pytest.raises(InputError, match="plausible"):
        surveyed(np.append(sodium(2000), 1e200))


@pytest.mark.parametrize(
    "x",
    [
        np.where(np.arange(3000) % 3 == 0, 5.0, 6.0),
        np.append(np.full(2999, 5.0), 99_999.0),
        np.where(np.arange(3000) % 97 == 0, 7.0, 5.0),
        np.linspace(1, 1000, 3000),
        np.random.default_rng(1).lognormal(0, 6, 3000),
        np.random.default_rng(1).lognormal(0, 1, 3000) * 1e-200,
        np.zeros(3000),
    ],
)
@pytest.mark.parametrize("days", [1e-6, 1, 2500])
def test_strange_streams_are_surveyed(x: np.ndarray, days: float):
    assert surveyed(x, days=days, analyte="tsh").volume.results == 3000
    assert surveyed(x, days=days, censor=np.arange(3000) % 2).volume.results == 3000


def test_reagent_lots_are_told_with_the_step_from_the_lot_before() -> None:
    random = np.random.default_rng(3)
    n = 12_000
    lot = np.repeat([1, 0], n // 2)
    x = np.rint(random.normal(139, 3, n) + np.where(lot == 0, 2.0, 0.0))
    time = BEGIN + np.linspace(0, 120 * MICROSECONDS_PER_DAY - 1, n).astype(np.int64)
    words = np.full(n, "", dtype=object)
    history = StreamHistory(
        StreamName("sodium", "line-1"), time, x, np.zeros(n, dtype=np.int8), words, words, words, words
    )
    found = survey_stream(history, np.full(n, -1), LAB, 1, lot, ["R-2", "R-1"])
    first, second = found.lots
    assert (first.lot, first.results, first.step) == ("R-1", n // 2, None)
    assert second.lot == "R-2" and second.step == pytest.approx(0.5, abs=0.03)
    assert second.step_interval is not None and second.step_interval[0] < second.step < second.step_interval[1]
    (told,) = [one.words for one in found.oddities if one.short == "lots 1"]
    assert "TEa with lot R-2 from 2031-03-07" in told


def test_lots_of_the_same_level_are_no_oddity() -> None:
    n = 12_000
    x = np.rint(np.random.default_rng(4).normal(139, 3, n))
    time = BEGIN + np.linspace(0, 120 * MICROSECONDS_PER_DAY - 1, n).astype(np.int64)
    words = np.full(n, "", dtype=object)
    history = StreamHistory(
        StreamName("sodium", "line-1"), time, x, np.zeros(n, dtype=np.int8), words, words, words, words
    )
    found = survey_stream(history, np.full(n, -1), LAB, 1, np.repeat([0, 1], n // 2), ["R-1", "R-2"])
    assert len(found.lots) == 2
    assert not [one for one in found.oddities if one.short.startswith("lots")]
