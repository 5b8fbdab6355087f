"""The report is one self-contained, well-formed page that holds every figure of the appraisal and escapes every name."""

import os
import re
import subprocess
import sys
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import pytest

from pbm.io.report import words
from pbm.io.report.page import report, write_report
from pbm.records.appraisal import Appraisal, MonitorAppraisal, StreamAppraisal
from tests.io.report import sample
from tests.io.report.parsed import Page, plain

CASES = {
    "three": sample.THREE,
    "empty": sample.appraisal(),
    "none useful": sample.appraisal(sample.TSH, sample.TSH),
    "hostile": sample.hostile(),
    "two monitors": sample.appraisal(sample.SODIUM.model_copy(update={"monitors": sample.SODIUM.monitors * 2})),
}
all_cases = pytest.mark.parametrize("case", CASES)


@cache
def text_of(case: str) -> str:
    return report(CASES[case])


@cache
def page_of(case: str) -> Page:
    return Page(text_of(case))


@all_cases
def test_the_page_is_well_formed(case: str) -> None:
    assert page_of(case).wrong == []
    assert text_of(case).startswith("<!DOCTYPE html>")


@all_cases
def test_the_page_needs_nothing_from_elsewhere(case: str) -> None:
    page = page_of(case)
    assert not {one.tag for one in page.elements} & {
        "script",
        "link",
        "img",
        "iframe",
        "object",
        "embed",
        "base",
        "form",
    }
    assert "http" not in text_of(case)
    assert not re.search(r"@import|url\(|@font-face", text_of(case))
    for one in page.elements:
        assert not [name for name in one.attributes if name.startswith("on") or name in ("src", "srcset", "xlink:href")]


@all_cases
def test_every_identifier_is_there_once_and_every_link_finds_its_own(case: str) -> None:
    page = page_of(case)
    identifiers = [one.attributes["id"] for one in page.elements if "id" in one.attributes]
    assert len(set(identifiers)) == len(identifiers)
    links = [one.attributes["href"] for one in page.elements if "href" in one.attributes]
    assert {link.removeprefix("#") for link in links} <= set(identifiers)
    assert all(link.startswith("#") for link in links)


@all_cases
def test_a_figure_refers_only_to_its_own_parts(case: str) -> None:
    for plot in page_of(case).of("svg"):
        own = {one.attributes["id"] for one in plot.inside if "id" in one.attributes}
        assert {one.attributes["href"][1:] for one in plot.inside if "href" in one.attributes} <= own


@all_cases
def test_every_figure_says_what_is_seen(case: str) -> None:
    for plot in page_of(case).of("svg"):
        assert plot.attributes["role"] == "img"
        assert len(plot.attributes["aria-label"].split()) > 8
        assert plot.attributes["aria-label"].endswith(".")


@all_cases
def test_every_figure_names_its_axes_and_lines(case: str) -> None:
    for plot in page_of(case).of("svg"):
        told = plain(plot)
        assert "size of the" in told or "day of the held-out history" in told
        assert "controls + monitor" in told or "upper limit" in told


def test_the_page_fits_the_window_and_the_paper() -> None:
    style = text_of("three")
    assert 'name="viewport"' in style
    assert "@media print" in style
    assert "@page { size: A4" in style
    assert "table-header-group" in style
    assert re.search(r"@media screen and \(max-width: \d+px\)", style)


@all_cases
def test_the_same_appraisal_gives_the_same_page(case: str) -> None:
    assert report(CASES[case].model_copy(deep=True)) == text_of(case)


def test_another_process_with_other_settings_writes_the_same_bytes(tmp_path: Path) -> None:
    (tmp_path / "matplotlibrc").write_text(
        "font.size: 20\nsvg.fonttype: path\naxes.facecolor: red\nlines.linewidth: 9\n"
    )
    program = (
        "import sys; from pathlib import Path; from pbm.io.report.page import write_report; from tests.io.report.sample import THREE; "
        "write_report(Path(sys.argv[1]), THREE)"
    )
    root = str(Path(__file__).parents[3])
    settings = {**os.environ, "PYTHONHASHSEED": "7", "PYTHONPATH": root, "LC_ALL": "C", "TZ": "Asia/Tokyo"}
    subprocess.run([sys.executable, "-c", program, "there.html"], cwd=tmp_path, env=settings, check=True)
    write_report(tmp_path / "here.html", sample.THREE)
    assert (tmp_path / "there.html").read_bytes() == (tmp_path / "here.html").read_bytes()


def test_the_reader_s_own_matplotlib_settings_are_left_as_they_were() -> None:
    import matplotlib

    matplotlib.rcParams["font.size"] = 17.0
    try:
        report(sample.appraisal(sample.ALBUMIN))
        assert matplotlib.rcParams["font.size"] == 17.0
    finally:
        matplotlib.rcdefaults()


def test_hostile_names_are_shown_as_text() -> None:
    page = page_of("hostile")
    assert "<script" not in text_of("hostile")
    assert "\x07" not in text_of("hostile")
    (title,) = page.of("h1")
    assert plain(title) == " ".join(sample.HOSTILE.replace("\x07", "\ufffd").split())
    assert any("<script>" in plain(plot) for plot in page.of("svg"))


def figures_of(monitor: MonitorAppraisal) -> Iterator[str]:
    """Every figure of a monitor as it is written on the page."""
    yield words.sentence(monitor.words)
    yield words.percent(monitor.admitted)
    for value in (monitor.centre, monitor.low, monitor.high):
        yield words.level(value, monitor.low, monitor.high)
    alarms = monitor.false_alarms
    yield f"{alarms.episodes} in {alarms.days} days; the budget allows {words.expected(alarms.allowed)}"
    yield f"between {words.expected(alarms.interval[0])} and {words.expected(alarms.interval[1])}"
    yield "The budget is kept." if alarms.kept else "The budget is not kept."
    for worst in (monitor.worst_unreliable, monitor.worst_final):
        for figure in (worst.alone, worst.with_monitor):
            yield words.expected(figure.value)
            yield words.interval(figure)
    yield words.percent(max(fault.schedule_error for fault in monitor.faults))


def rows_of(monitor: MonitorAppraisal, unit: str) -> Iterator[list[str]]:
    """What each row of the tables of all figures must hold, by error and table."""
    for fault in monitor.faults:
        name = words.fault_in_words(fault, unit)
        counts = [
            fault.unreliable.alone,
            fault.unreliable.with_monitor,
            fault.unreliable_final.alone,
            fault.unreliable_final.with_monitor,
        ]
        yield [
            name,
            words.shift_in_words(fault, unit),
            *(f"{words.expected(one.value)} {words.interval(one)}" for one in counts),
        ]
        ways = (fault.by_first_event.schedule, fault.by_first_event.monitor, fault.by_first_event.both)
        yield [name, *(f"{words.percent(one.value)} {words.share_interval(one)}" for one in ways)]
        yield [
            name,
            f"before it {words.percent(fault.before_first_event.value)}, {words.share_interval(fault.before_first_event)}",
        ]
        for way in (fault.until.schedule, fault.until.monitor, fault.until.both):
            median, p95 = (words.results_until(one, sample.HORIZON) for one in (way.median, way.p95))
            yield [name, f"{median} 95 %: {p95} mean {words.mean_in_words(way)}; never {words.percent(way.never)}"]


@pytest.mark.parametrize("place", range(len(sample.THREE.streams)))
def test_every_fact_of_a_stream_stands_in_its_section(place: int) -> None:
    stream = sample.THREE.streams[place]
    told = plain(page_of("three").identified(f"stream-{place + 1}"))
    facts = [
        stream.stream,
        stream.verdict,
        stream.reason,
        stream.allowable_error,
        stream.schedule,
        stream.first_day,
        stream.last_day,
    ]
    numbers = [words.number(stream.results_per_day), words.whole(stream.held_out_results)]
    tried = [stream.response_lag, words.whole(stream.onsets), "7 days"] if stream.monitors else []
    for one in facts + numbers + tried:
        assert " ".join(one.split()) in told


@pytest.mark.parametrize("place", [0, 1, 2])
def test_every_figure_of_the_record_stands_in_the_section_of_its_stream(place: int) -> None:
    stream = sample.THREE.streams[place]
    section = page_of("three").identified(f"stream-{place + 1}")
    told, rows = plain(section), [plain(one) for one in section.inside if one.tag == "tr"]
    (monitor,) = stream.monitors
    for one in figures_of(monitor):
        assert " ".join(one.split()) in told
    for parts in rows_of(monitor, stream.unit):
        assert [row for row in rows if all(" ".join(part.split()) in row for part in parts)], parts


def test_the_summary_holds_each_stream_with_its_worst_case_and_alarms() -> None:
    rows = [plain(one) for one in page_of("three").identified("summary").inside if one.tag == "tr"]
    for stream in sample.THREE.streams:
        (row,) = (one for one in rows if one.startswith(stream.stream))
        assert stream.verdict in row
        assert " ".join(words.number(stream.results_per_day).split()) in row
        if not stream.monitors:
            assert stream.reason in row
            continue
        (monitor,) = stream.monitors
        worst, alarms = monitor.worst_unreliable, monitor.false_alarms
        for part in (
            monitor.brief,
            f"{words.expected(worst.alone.value)} {words.interval(worst.alone)}",
            f"{words.expected(worst.with_monitor.value)} {words.interval(worst.with_monitor)}",
            words.saved(worst.alone.value, worst.with_monitor.value),
            f"{alarms.episodes}, {'kept' if alarms.kept else 'NOT kept'} allowed {words.expected(alarms.allowed)}",
            words.expected(alarms.episodes * 30 / 40),
            f"{words.expected(alarms.interval[0] * 30 / 40)} to {words.expected(alarms.interval[1] * 30 / 40)}",
        ):
            assert " ".join(part.split()) in row, part


def test_the_summary_comes_first_and_its_streams_link_to_their_sections() -> None:
    page = page_of("three")
    assert page.of("section")[0].attributes["id"] == "summary"
    links = {plain(one): one.attributes["href"] for one in page.of("a")}
    assert links == {stream.stream: f"#stream-{place}" for place, stream in enumerate(sample.THREE.streams, 1)}


def test_the_cautions_and_the_lines_to_sign_are_there() -> None:
    summary = plain(page_of("three").identified("summary"))
    for caution in (
        "supplements control materials and never replaces them",
        "laboratory director’s decision under local regulation and accreditation",
        "depend on TEa, analytic SD and the history given",
        "not a diagnostic device",
        "does not prove that there is no error",
        "Decision Name Date and signature",
    ):
        assert caution in summary


def test_the_page_says_what_it_was_made_from() -> None:
    told = plain(page_of("three").identified("made"))
    for one in ("pbm 0.1.0", "20310302", "ab" * 32, "cd" * 32, "ef" * 32):
        assert one in told


def test_a_stream_without_a_monitor_has_its_reason_and_no_plot() -> None:
    section = page_of("three").identified("stream-4")
    assert sample.TSH.reason in plain(section)
    assert not [one for one in section.inside if one.tag in ("svg", "figure", "table")]


def test_a_laboratory_where_no_monitor_is_useful_is_told_so() -> None:
    page = page_of("none useful")
    assert page.of("svg") == []
    assert "the controls alone stand" in plain(page.identified("summary"))
    assert "2 not useful here" in plain(page.identified("summary"))


def test_an_empty_appraisal_has_a_page() -> None:
    page = page_of("empty")
    assert "0 streams judged." in plain(page.identified("summary"))
    assert page.of("table") == []


def test_two_monitors_of_a_stream_stand_apart() -> None:
    told = plain(page_of("two monitors").identified("stream-1"))
    assert "The monitor (1 of 2)" in told
    assert "The monitor (2 of 2)" in told
    assert len(page_of("two monitors").of("svg")) == 8


def plots_of(stream: StreamAppraisal) -> int:
    return sum(1 + 3 * len({fault.kind for fault in monitor.faults}) for monitor in stream.monitors)


def test_each_kind_of_error_has_three_plots_and_each_monitor_a_trace() -> None:
    for place, stream in enumerate(sample.THREE.streams, 1):
        plots = [one for one in page_of("three").identified(f"stream-{place}").inside if one.tag == "svg"]
        assert len(plots) == plots_of(stream)


def test_a_monitor_that_was_never_ready_has_no_trace() -> None:
    (monitor,) = sample.ALBUMIN.monitors
    bare = monitor.model_copy(
        update={"trace": monitor.trace.model_copy(update={"day": (), "lowest": (), "highest": ()})}
    )
    page = Page(report(sample.appraisal(sample.ALBUMIN.model_copy(update={"monitors": (bare,)}))))
    assert len(page.of("svg")) == 3


def test_what_is_never_found_is_said_in_words() -> None:
    never = sample.results_until(1e9, 160.0)
    (monitor,) = sample.ALBUMIN.monitors
    until = {"schedule": never, "monitor": never, "both": never}
    faults = tuple(one.model_copy(update={"until": one.until.model_copy(update=until)}) for one in monitor.faults)
    stream = sample.ALBUMIN.model_copy(update={"monitors": (monitor.model_copy(update={"faults": faults}),)})
    page = Page(report(sample.appraisal(stream)))
    assert page.wrong == []
    assert any(
        "more than half never found within 7 days, at any size" in plot.attributes["aria-label"]
        for plot in page.of("svg")
    )
    assert "More than half never found within 7 days, even with the monitor: shift ±0.25" in plain(
        page.identified("stream-1")
    )
    assert "over 7 days 95 %: over 7 days mean at least" in plain(page.identified("stream-1"))


@pytest.mark.parametrize("scale", [1e-9, 1e-3, 1e6, 1e12])
def test_very_small_and_very_large_levels_are_drawn(scale: float) -> None:
    stream = sample.stream("odd@unit", "u", 1e5, sample.monitor(1e5, 4 * scale, 139 * scale, 30.0))
    page = Page(report(sample.appraisal(stream)))
    assert page.wrong == []
    assert len(page.of("svg")) == 4
    assert "nan" not in plain(page.identified("stream-1"))


def test_a_single_size_and_a_single_moment_are_drawn() -> None:
    (monitor,) = sample.SODIUM.monitors
    trace = monitor.trace.model_copy(update={"day": (0.0,), "lowest": (139.0,), "highest": (139.0,)})
    bare = monitor.model_copy(update={"faults": monitor.faults[:1], "trace": trace})
    page = Page(report(sample.appraisal(sample.SODIUM.model_copy(update={"monitors": (bare,)}))))
    assert page.wrong == []
    assert len(page.of("svg")) == 4


@pytest.mark.slow
def test_forty_streams_make_a_page_below_five_megabytes() -> None:
    appraisal: Appraisal = sample.many(40)
    text = report(appraisal)
    page = Page(text)
    assert page.wrong == []
    assert len(page.of("svg")) == 160
    assert len(text.encode()) < 5e6
    identifiers = [one.attributes["id"] for one in page.elements if "id" in one.attributes]
    assert len(set(identifiers)) == len(identifiers)


def test_a_failed_write_leaves_the_old_page(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "appraisal.html"
    path.write_text("old")

    def full_disk(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full_disk)
    with pytest.raises(OSError, match="No space"):
        write_report(path, sample.appraisal())
    assert path.read_text() == "old"
