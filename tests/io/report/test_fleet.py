"""The summary sorts by gain and names everything that is not covered, with its reason."""

from pbm.io.report import fleet
from pbm.records.appraisal import Figure, StreamAppraisal, WorstCase
from tests.io.report import sample


def with_worst(name: str, alone: float, beside: float) -> StreamAppraisal:
    (monitor,) = sample.SODIUM.monitors
    worst = WorstCase(
        alone=Figure(value=alone, low=alone, high=alone),
        alone_at=monitor.faults[0].label,
        with_monitor=Figure(value=beside, low=beside, high=beside),
        with_monitor_at=monitor.faults[1].label,
    )
    return sample.SODIUM.model_copy(
        update={"stream": name, "monitors": (monitor.model_copy(update={"worst_unreliable": worst}),)}
    )


def places(appraisal: object, title: str) -> dict[str, str]:
    assert isinstance(appraisal, type(sample.THREE))
    return dict(next((one.places for one in fleet.gaps(appraisal) if title in one.title), ()))


def test_streams_stand_by_gain_and_those_without_a_monitor_last() -> None:
    given = sample.appraisal(
        sample.TSH, with_worst("small", 10, 9), with_worst("worse", 5, 6), with_worst("large", 100, 60)
    )
    assert [row.stream.stream for row in fleet.fleet_rows(given)] == ["large", "small", "worse", "tsh@immuno"]
    assert [row.anchor for row in fleet.fleet_rows(given)] == ["stream-4", "stream-2", "stream-3", "stream-1"]


def test_the_bar_shows_what_is_left_and_never_leaves_its_frame() -> None:
    rows = fleet.fleet_rows(sample.appraisal(with_worst("a", 100, 25), with_worst("b", 10, 30), with_worst("c", 0, 0)))
    assert [row.left for row in rows] == [25, 100, 100]


def test_the_greatest_gain_is_told_only_where_there_is_one() -> None:
    assert "large" in fleet.in_short(sample.appraisal(with_worst("large", 100, 60)))[-1]
    assert not any("greatest gain" in one for one in fleet.in_short(sample.appraisal(with_worst("worse", 5, 6))))


def test_a_worst_case_hardly_lower_is_named_whatever_the_verdict() -> None:
    given = sample.appraisal(with_worst("hardly", 24.6, 24.2), with_worst("much", 80, 20))
    assert places(given, "Worst case lowered by less than a tenth") == {"hardly": "24.6 alone, 24.2 with the monitor"}


def test_a_stream_that_is_not_useful_is_named_with_its_reason() -> None:
    named = places(sample.THREE, "No monitor that is clearly useful")
    assert sample.TSH.reason in named["tsh@immuno"]
    assert named["albumin@line-1"].startswith("marginal. ")
    assert "sodium@line-2" not in named


def test_a_budget_that_was_not_kept_is_named() -> None:
    (monitor,) = sample.SODIUM.monitors
    alarms = monitor.false_alarms.model_copy(update={"kept": False, "episodes": 9})
    stream = sample.SODIUM.model_copy(update={"monitors": (monitor.model_copy(update={"false_alarms": alarms}),)})
    assert places(sample.appraisal(stream), "budget not kept") == {"sodium@line-2": "9 alarms, 1.33 allowed"}
    assert places(sample.appraisal(sample.CALCIUM), "budget not kept") == {}


def test_kinds_of_error_that_were_not_tried_are_named() -> None:
    assert places(sample.THREE, "not tried") == {
        "sodium@line-2, albumin@line-1": "drift, noise (imprecision), sporadic error"
    }
    assert places(sample.appraisal(sample.SODIUM), "not tried") == {
        "all streams": "drift, noise (imprecision), sporadic error"
    }
    assert places(sample.appraisal(sample.CALCIUM), "not tried") == {}


def test_errors_are_listed_with_both_signs_together() -> None:
    shifts = {(one.size, one.sign): one for one in sample.SODIUM.monitors[0].faults}
    given = [shifts[0.25, -1], shifts[0.25, 1], shifts[0.5, 1]]
    assert fleet.listed(given, "mmol/L") == "shift ±0.25, +0.5 TEa"
    noise = [one for one in sample.CALCIUM.monitors[0].faults if one.kind == "noise"]
    assert fleet.listed([*given[:1], noise[0]], "mmol/L") == "shift −0.25 TEa; noise 1.5 times the analytic SD"


def test_alarms_are_told_for_a_month() -> None:
    alarms = sample.SODIUM.monitors[0].false_alarms
    assert fleet.a_month(4, alarms) == 3
    assert fleet.a_month(4, alarms.model_copy(update={"days": 0})) == 0


def test_a_label_becomes_the_words_used_elsewhere() -> None:
    (monitor,) = sample.CALCIUM.monitors
    assert fleet.named(monitor, "noise x2", "mmol/L") == "noise 2 times the analytic SD"
    assert fleet.named(monitor, "something else", "mmol/L") == "something else"
