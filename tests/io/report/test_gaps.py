"""What is not covered is told in a line each, however many streams there are, and for each stream error by error."""

from pbm.io.report import gaps, words
from pbm.records.appraisal import Appraisal
from pbm.records.figures import Percentile
from tests.io.report import sample, variants
from tests.io.report.variants import judged_of, with_judged


def told(appraisal: Appraisal, title: str) -> str:
    return next((one.told for one in gaps.gaps(appraisal) if title in one.title), "")


def test_streams_without_a_monitor_and_with_one_that_pays_in_part_are_named() -> None:
    assert told(sample.THREE, "Without a monitor") == "tsh@immuno"
    assert told(sample.THREE, "pays only in part") == "albumin@line-1"
    assert told(sample.appraisal(variants.harming(sample.SODIUM)), "does not pay") == "sodium@line-2"


def test_a_worst_error_hardly_lower_is_named_whatever_the_verdict() -> None:
    hardly = with_judged(sample.SODIUM, worst_unreliable=judged_of(sample.SODIUM).worst_unreliable.model_copy(
        update={"with_monitor": judged_of(sample.SODIUM).worst_unreliable.alone}))  # fmt: skip
    assert told(sample.appraisal(hardly, sample.CALCIUM), "Worst error") == "sodium@line-2"


def test_a_budget_that_was_not_kept_is_named_with_its_count() -> None:
    assert told(sample.appraisal(variants.harming(sample.SODIUM)), "budget not kept") == (
        "sodium@line-2 (9 alarms, 1.33 allowed)"
    )
    assert told(sample.appraisal(sample.CALCIUM), "budget not kept") == ""


def test_errors_are_counted_over_the_streams_on_which_they_were_tried() -> None:
    harmed = variants.harming(sample.SODIUM)
    found = told(sample.appraisal(harmed, sample.CALCIUM), "Saves less than a tenth")
    assert found.startswith("shift (TEa) 0.25 in 1 of 2, 0.5 in 1 of 2")
    assert found.endswith(" streams")


def test_errors_never_found_are_told_with_their_course() -> None:
    judged = judged_of(sample.CALCIUM)
    never = Percentile(value=None, low=None, high=None)
    faults = tuple(
        one.model_copy(
            update={"until": one.until.model_copy(update={"both": one.until.both.model_copy(update={"median": never})})}
        )
        if one.kind == "drift"
        else one
        for one in judged.faults
    )
    stream = with_judged(sample.CALCIUM, faults=faults)
    assert told(sample.appraisal(stream), "never found") == (
        "drift (TEa) over 200 results 0.5 in 1 of 1, 1 in 1 of 1, 2 in 1 of 1 streams"
    )
    assert any(
        "never found within 7 days, even with the monitor: drift ±0.5, ±1, ±2 TEa over 200 results" in one
        for one in gaps.where_it_does_not_help(stream, judged_of(stream))
    )


def test_where_few_patients_make_it_slow_is_told_beside_the_daytime() -> None:
    found = told(sample.appraisal(sample.ALBUMIN), "Nights and weekends")
    parts = {one.when: one for one in judged_of(sample.ALBUMIN).by_onset}
    assert "albumin@line-1" in found and "at a weekend" in found
    assert f"{words.number(parts['weekend'].until_hours.both.value)} h on average" in found
    assert f"({words.number(parts['day'].until_hours.both.value)} h where it begins in the daytime)" in found


def test_kinds_of_error_that_were_not_tried_are_named() -> None:
    all_but_shift = "drift, noise (imprecision), sporadic error"
    assert told(sample.THREE, "not tried") == f"{all_but_shift} on sodium@line-2, albumin@line-1"
    assert told(sample.appraisal(sample.SODIUM), "not tried") == f"{all_but_shift} on any stream"
    assert told(sample.appraisal(sample.CALCIUM), "not tried") == ""
    many = sample.appraisal(*(sample.SODIUM.model_copy(update={"stream": f"s@{i}"}) for i in range(5)), sample.CALCIUM)
    assert told(many, "not tried") == f"{all_but_shift} on 5 of 6 streams"


def test_a_stream_s_page_tells_where_its_monitor_does_not_help_and_what_check_objects_to() -> None:
    harmed = variants.harming(sample.ALBUMIN)
    lines = list(gaps.where_it_does_not_help(harmed, judged_of(harmed)))
    assert lines[0].startswith("Saves less than a tenth of the unreliable results at: shift ±0.25, ±0.5")
    assert "Finds no more than its false alarms would at: shift ±0.25 TEa." in lines
    assert lines[-1] == "Objection of pbm appraise --check: More harm than good: it saves nothing."


def test_exact_and_simulated_chances_of_the_control_rules_are_told_apart() -> None:
    judged = judged_of(sample.SODIUM)
    assert "standard error of at most 0.2" in gaps.simulated(judged)
    exact = tuple(one.model_copy(update={"schedule_error": 0.0}) for one in judged.faults)
    assert gaps.simulated(judged.model_copy(update={"faults": exact})) == "The control rules’ chances are exact."


def test_the_summary_stays_short_with_very_many_streams() -> None:
    assert len(gaps.gaps(sample.many(12))) == len(gaps.gaps(sample.many(3)))
