"""The report is one self-contained, well-formed page that holds every figure of the appraisal and escapes every name."""

import os
import re
import subprocess
import sys
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import pytest

from pbm.io.report import fault_words, words
from pbm.io.report.page import report, write_report
from pbm.records.appraisal import Appraisal, MonitorAppraisal
from pbm.records.figures import AloneAndWith
from pbm.records.judged import Judged
from pbm.records.tuning import Tuning
from tests.io.report import sample, variants
from tests.io.report.parsed import Page, plain
from tests.io.report.variants import judged_of

CASES = {
    "three": sample.THREE,
    "empty": sample.appraisal(),
    "none useful": sample.appraisal(sample.TSH, sample.TSH),
    "hostile": sample.hostile(),
    "two monitors": sample.appraisal(variants.with_imprecision(sample.SODIUM)),
    "no monitor": sample.appraisal(variants.unwatched(sample.ALBUMIN)),
    "harming": sample.appraisal(variants.harming(sample.ALBUMIN)),
    "reasons": sample.appraisal(variants.as_chosen(sample.SODIUM), sample.TSH),
}
TUNED: dict[str, Tuning] = {
    "reasons": variants.tuning(
        sodium__line_2=variants.reasons(together="One monitor is enough"), tsh__immuno=variants.reasons()
    )
}
all_cases = pytest.mark.parametrize("case", CASES)


@cache
def text_of(case: str) -> str:
    return report(CASES[case], TUNED.get(case))


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
        if "panels" in plot.attributes["class"]:
            assert "weight" in told and "EWMA" in told
            continue
        assert "size of the" in told or "day of the held-out history" in told
        assert "controls alone" in told or "upper limit" in told


def test_the_page_fits_the_window_and_the_paper() -> None:
    style = text_of("three")
    assert 'name="viewport"' in style
    assert "@media print" in style
    assert "@page { size: A4" in style
    assert "table-header-group" in style
    assert re.search(r"@media screen and \(max-width: \d+px\)", style)


@all_cases
def test_the_same_appraisal_gives_the_same_page(case: str) -> None:
    assert report(CASES[case].model_copy(deep=True), TUNED.get(case)) == text_of(case)


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
    assert monitor.low is not None and monitor.high is not None
    for value in (monitor.centre, monitor.low, monitor.high):
        yield words.level(value, monitor.low, monitor.high)
    alarms = monitor.false_alarms
    yield f"{alarms.episodes} in {alarms.days} days; the budget allows {words.expected(alarms.allowed)}"
    yield f"A month: {words.expected(alarms.a_month.value)} ({words.interval(alarms.a_month)})"
    yield "The budget is kept." if alarms.kept else "The budget is NOT kept."
    yield "The training days predicted 0 to 4"


def paired(found: AloneAndWith) -> Iterator[str]:
    """A figure alone, with the monitor, and the difference."""
    for figure in (found.alone, found.with_monitor):
        yield f"{words.expected(figure.value)} {words.interval(figure)}"
    yield f"{words.share_fewer(found)} {words.fewer_interval(found)}"


def rows_of(judged: Judged, unit: str) -> Iterator[list[str]]:
    """What each row of the tables must hold, by error and table."""
    for fault in judged.faults:
        name = fault_words.fault_in_words(fault, unit)
        final = list(paired(fault.unreliable_final))[:2]
        yield [name, fault_words.shift_in_words(fault, unit), *paired(fault.unreliable), *final]
        ways = (fault.by_first_event.schedule, fault.by_first_event.monitor, fault.by_first_event.both)
        yield [name, *(f"{words.percent(one.value)} {words.share_interval(one)}" for one in ways)]
        for way in ("schedule", "monitor", "both"):
            until, never = getattr(fault.until, way), getattr(fault.never, way).value
            told = words.until(until.median, sample.HORIZON)
            if until.p5.value is not None:
                told += f" {words.until(until.p5, sample.HORIZON)} to {words.until(until.p95, sample.HORIZON)}"
            hours = words.number(getattr(fault.until_hours, way).mean.value)
            yield [name, f"{told} mean {words.mean_in_words(until, never)}; {hours} h; never {words.percent(never)}"]
    for part in judged.by_onset:
        yield [part.when, words.number(part.results_per_hour), *list(paired(part.unreliable))[:2]]
    for row in judged.spacing:
        yield [row.controls, words.number(row.events_per_day), *list(paired(row.unreliable))[:2]]
    assert judged.peers is not None
    for peer in judged.peers.compared:
        yield [peer.title, peer.settings, f"{words.expected(peer.unreliable.value)} {words.interval(peer.unreliable)}"]
    for found in (judged.unreliable, judged.unreliable_final, judged.yearly.unreliable, judged.yearly.unreliable_final):
        yield list(paired(found))


@pytest.mark.parametrize("place", range(len(sample.THREE.streams)))
def test_every_fact_of_a_stream_stands_in_its_section(place: int) -> None:
    stream = sample.THREE.streams[place]
    told = plain(page_of("three").identified(f"stream-{place + 1}"))
    facts = [stream.stream, stream.verdict, stream.reason, stream.first_day, stream.last_day]
    judged = [stream.allowable_error, stream.schedule, stream.response_lag, words.whole(stream.onsets), "7 days"]
    numbers = [words.number(stream.results_per_day), words.whole(stream.held_out_results)]
    for one in facts + (judged + numbers if stream.judged else []):
        assert " ".join(one.split()) in told


@pytest.mark.parametrize("place", [0, 1, 2])
def test_every_figure_of_the_record_stands_in_the_section_of_its_stream(place: int) -> None:
    stream = sample.THREE.streams[place]
    section = page_of("three").identified(f"stream-{place + 1}")
    told, rows = plain(section), [plain(one) for one in section.inside if one.tag == "tr"]
    (monitor,) = stream.monitors
    for one in figures_of(monitor):
        assert " ".join(one.split()) in told
    for parts in rows_of(judged_of(stream), stream.unit):
        assert [row for row in rows if all(" ".join(part.split()) in row for part in parts)], parts


@pytest.mark.parametrize("place", [0, 1, 2])
def test_the_caution_stands_beside_the_spacing_table(place: int) -> None:
    section = page_of("three").identified(f"stream-{place + 1}")
    (beside,) = (one for one in section.inside if one.attributes.get("class") == "beside")
    assert [one.tag for one in beside.inside if one.tag in ("table", "aside")] == ["table", "aside"]
    assert judged_of(sample.THREE.streams[place]).spacing_caution in plain(beside)


def test_each_stream_names_what_it_was_made_from_and_can_be_signed() -> None:
    told = plain(page_of("three").identified("stream-1"))
    for one in (
        "pbm 0.1.0",
        "numpy 2.2.1",
        "20310302",
        "ab" * 32,
        "cd" * 32,
        "ef" * 32,
        "Decision Name Date and signature",
    ):
        assert one in told


def test_the_summary_holds_each_stream_with_its_year_worst_error_and_alarms() -> None:
    rows = [plain(one) for one in page_of("three").identified("summary").inside if one.tag == "tr"]
    for stream in sample.THREE.streams:
        (row,) = (one for one in rows if one.startswith(stream.stream))
        assert stream.verdict in row
        if not stream.monitors:
            assert stream.reason in row
            continue
        judged = judged_of(stream)
        year, worst, alarms = judged.yearly.unreliable, judged.worst_unreliable, judged.false_alarms
        assert alarms is not None
        for part in (
            f"{words.expected(year.alone.value)} {words.expected(year.with_monitor.value)}",
            f"{words.share_fewer(year)} {words.fewer_interval(year)}",
            f"{words.expected(worst.alone.value)} {words.expected(worst.with_monitor.value)}",
            f"{words.expected(alarms.a_month.value)} {words.interval(alarms.a_month)}",
            f"1.00, {'kept' if alarms.kept else 'NOT kept'}",
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


@pytest.mark.slow
def test_forty_streams_make_a_page_below_five_megabytes() -> None:
    appraisal: Appraisal = sample.many(40)
    reasons = {one.stream: variants.reasons() for one in appraisal.streams}
    text = report(appraisal, variants.tuning().model_copy(update={"streams": reasons}))
    page = Page(text)
    assert page.wrong == []
    assert len(page.of("svg")) == 200
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
