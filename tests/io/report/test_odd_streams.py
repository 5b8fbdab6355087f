"""Streams that are not as usual have a page all the same: no monitor, two, one that harms, nothing found, reasons kept or not."""

import pytest

from pbm.io.report.page import report
from pbm.records.appraisal import StreamAppraisal
from pbm.records.tuning import Tuning
from tests.io.report import sample, variants
from tests.io.report.parsed import Element, Page, plain
from tests.io.report.variants import judged_of, with_judged


def page_of(*streams: StreamAppraisal, tuning: Tuning | None = None) -> Page:
    page = Page(report(sample.appraisal(*streams), tuning))
    assert page.wrong == []
    return page


def plots(element: Element) -> list[Element]:
    return [one for one in element.inside if one.tag == "svg"]


def test_a_stream_too_short_to_be_judged_has_its_reason_and_no_plot() -> None:
    section = page_of(sample.SODIUM, sample.TSH).identified("stream-2")
    assert sample.TSH.reason in plain(section)
    assert not [one for one in section.inside if one.tag in ("svg", "figure", "table")]


def test_a_stream_without_a_monitor_shows_what_the_controls_do_alone() -> None:
    section = page_of(variants.unwatched(sample.ALBUMIN)).identified("stream-1")
    told = plain(section)
    assert "No monitor: what follows is what the control schedule does alone." in told
    assert len(plots(section)) == 3
    assert "With monitor" not in told and "Monitor alone" not in told


def test_a_laboratory_where_no_monitor_is_useful_is_told_so() -> None:
    page = page_of(sample.TSH, sample.TSH)
    assert page.of("svg") == []
    assert "the controls alone stand" in plain(page.identified("summary"))
    assert "2 not useful here" in plain(page.identified("summary"))


def test_an_empty_appraisal_has_a_page() -> None:
    page = page_of()
    assert "No stream was judged." in plain(page.identified("summary"))
    assert page.of("table") == []


def test_two_monitors_of_a_stream_stand_apart_and_together() -> None:
    section = page_of(variants.with_imprecision(sample.SODIUM)).identified("stream-1")
    told = plain(section)
    assert "Monitor 1 of 2, for shifts" in told
    assert "Monitor 2 of 2, for imprecision" in told
    assert "Alarms of both together" in told
    assert len(plots(section)) == 5


def test_a_limit_that_is_open_on_a_side_is_said_to_be() -> None:
    second = variants.with_imprecision(sample.SODIUM).monitors[1]
    told = plain(page_of(sample.SODIUM.model_copy(update={"monitors": (second,)})).identified("stream-1"))
    assert "alarms above 142 only" in told


def test_a_monitor_that_harms_is_told_in_words_in_summary_and_section() -> None:
    page = page_of(variants.harming(sample.ALBUMIN))
    summary, told = plain(page.identified("summary")), plain(page.identified("stream-1"))
    assert "25.0 % more 20.0 to 30.0 %" in summary
    assert "NOT kept" in summary
    assert "A monitor that does not pay: albumin@line-1." in summary
    assert "Objection of pbm appraise --check: More harm than good: it saves nothing." in told


def test_another_verdict_when_it_was_chosen_is_told() -> None:
    other = sample.ALBUMIN.model_copy(update={"planned_verdict": "useful", "planned_reason": "saves half"})
    assert "When it was chosen, by the training days: useful. Saves half." in plain(
        page_of(other).identified("stream-1")
    )


@pytest.mark.parametrize("place", [0, 1, 2])
def test_each_kind_of_error_has_three_plots_and_each_monitor_a_trace(place: int) -> None:
    stream = sample.THREE.streams[place]
    kinds = {fault.kind for fault in judged_of(stream).faults}
    assert len(page_of(stream).of("svg")) == 1 + 3 * len(kinds)


def test_a_monitor_that_was_never_ready_has_no_trace() -> None:
    (monitor,) = sample.ALBUMIN.monitors
    bare = monitor.model_copy(
        update={"trace": monitor.trace.model_copy(update={"day": (), "lowest": (), "highest": ()})}
    )
    assert len(page_of(sample.ALBUMIN.model_copy(update={"monitors": (bare,)})).of("svg")) == 3


def test_what_is_never_found_is_said_in_words() -> None:
    never, all_never = sample.until(1e9, 7 * 160.0), sample.ways(1.0, 1.0, 1.0)
    until = {"schedule": never, "monitor": never, "both": never}
    faults = tuple(
        one.model_copy(update={"until": one.until.model_copy(update=until), "never": all_never})
        for one in judged_of(sample.ALBUMIN).faults
    )
    page = page_of(with_judged(sample.ALBUMIN, faults=faults))
    told = plain(page.identified("stream-1"))
    assert any(
        "more than half never found within 7 days, at any size" in one.attributes["aria-label"]
        for one in page.of("svg")
    )
    assert "More than half never found within 7 days, even with the monitor: shift ±0.25" in told
    assert "over 7 days mean at least" in told


@pytest.mark.parametrize("scale", [1e-9, 1e-3, 1e6, 1e12])
def test_very_small_and_very_large_levels_are_drawn(scale: float) -> None:
    stream = sample.stream("odd@unit", "u", 1e5, sample.monitor(1e5, 4 * scale, 139 * scale, 30.0))
    page = page_of(stream)
    assert len(page.of("svg")) == 4
    assert "nan" not in plain(page.identified("stream-1"))


def test_a_single_size_and_a_single_moment_are_drawn() -> None:
    (monitor,) = sample.SODIUM.monitors
    trace = monitor.trace.model_copy(update={"day": (0.0,), "lowest": (139.0,), "highest": (139.0,)})
    stream = with_judged(sample.SODIUM, faults=judged_of(sample.SODIUM).faults[:1])
    bare = stream.model_copy(update={"monitors": (monitor.model_copy(update={"trace": trace}),)})
    assert len(page_of(bare).of("svg")) == 4


def test_without_the_reasons_of_a_search_none_are_told() -> None:
    assert "Why this monitor" not in plain(page_of(sample.SODIUM).identified("stream-1"))


def test_with_the_reasons_of_a_search_the_choice_and_its_rivals_are_shown() -> None:
    tuning = variants.tuning(sodium__line_2=variants.reasons(together="One monitor is enough"))
    page = page_of(variants.as_chosen(sample.SODIUM), tuning=tuning)
    section = page.identified("stream-1")
    told = plain(section)
    assert "14 choices were compared: 14 at 40 onsets of each error, then 6 at 250 onsets of each error." in told
    assert f"Chosen: {variants.CHOSEN}; its score is 8.35, of the controls alone 14.2" in told
    assert "One monitor is enough." in told
    (framed,) = (one for one in section.inside if "pick" in one.attributes.get("class", ""))
    assert plain(framed) == "8.40"
    rows = [plain(one) for one in section.inside if one.tag == "tr"]
    (rival,) = (row for row in rows if row.startswith("moving mean, of 40 results, all results"))
    assert "8.90 ± 0.0500" in rival and "6.6 %" in rival
    assert any(all(part in row for part in ("to the limit", "0.98", "9.30", "8.40", "10.2")) for row in rows)


def test_a_plan_edited_by_hand_is_told_beside_the_search() -> None:
    tuning = variants.tuning(sodium__line_2=variants.reasons())
    told = plain(page_of(sample.SODIUM, tuning=tuning).identified("stream-1"))
    assert "The plan no longer holds the monitor that this search chose: it was edited by hand" in told


def test_what_was_looked_for_in_vain_is_told_as_such() -> None:
    tuning = variants.tuning(albumin__line_1=variants.reasons())
    told = plain(page_of(variants.unwatched(sample.ALBUMIN), tuning=tuning).identified("stream-1"))
    assert "What was looked for" in told
    assert "The best of them, not put into the plan: EWMA" in told
