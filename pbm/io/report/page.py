"""The report: an appraisal, with the reasons of the plan where they are kept, laid out as one HTML page.

It sorts, formats and draws what the records hold, and computes nothing else.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from jinja2 import Environment, FileSystemLoader, StrictUndefined, Template
from markupsafe import Markup

from pbm.io.atomic import replace_file
from pbm.io.report import fault_words, gaps, monitor_words, reasons, summary, words
from pbm.io.report.error_plots import first_event_plot, unreliable_plot
from pbm.io.report.groups import FaultGroup, fault_groups
from pbm.io.report.look import drawing
from pbm.io.report.surface_plot import surface_plot
from pbm.io.report.svg import Album
from pbm.io.report.trace_plot import trace_plot
from pbm.io.report.until_plot import until_plot
from pbm.records.appraisal import Appraisal, MonitorAppraisal, StreamAppraisal
from pbm.records.judged import FaultAppraisal
from pbm.records.tuning import StreamTuning, Tuning

_HERE = Path(__file__).parent


@dataclass(frozen=True, slots=True)
class DrawnGroup:
    """The plots of one kind of error."""

    group: FaultGroup
    unreliable: Markup
    until: Markup
    first_event: Markup


@dataclass(frozen=True, slots=True)
class DrawnMonitor:
    """A monitor and its trace; no trace where the appraisal holds none."""

    monitor: MonitorAppraisal
    trace: Markup | None


@dataclass(frozen=True, slots=True)
class DrawnSearch:
    """A search and its small multiples."""

    shown: reasons.ShownSearch
    surfaces: Markup | None


@dataclass(frozen=True, slots=True)
class Section:
    """A stream with everything drawn, and where on the page it stands.

    Attributes
    ----------
    anchor
        Identifier.
    stream
        What was found.
    monitors
        Its monitors.
    groups
        Its errors, kind by kind.
    searches
        How its monitors were chosen.
    together
        Why there is a second monitor or none.
    """

    anchor: str
    stream: StreamAppraisal
    monitors: tuple[DrawnMonitor, ...]
    groups: tuple[DrawnGroup, ...]
    searches: tuple[DrawnSearch, ...]
    together: str

    @property
    def faults(self) -> tuple[FaultAppraisal, ...]:
        """The errors tried, in the order in which they are drawn."""
        return tuple(fault for drawn in self.groups for fault in drawn.group.faults)


def write_report(path: Path, appraisal: Appraisal, tuning: Tuning | None = None) -> None:
    """Write the report; the same records give the same bytes.

    Parameters
    ----------
    path
        The HTML file; its folder must exist.
    appraisal
        What was found.
    tuning
        Why the plan's monitors are what they are, where that is kept.
    """
    replace_file(path, report(appraisal, tuning).encode("utf-8"))


def report(appraisal: Appraisal, tuning: Tuning | None = None) -> str:
    """The report as HTML text: no script, nothing loaded from elsewhere."""
    album = Album()
    with drawing():
        sections = list(_sections(album, appraisal, tuning.streams if tuning else {}))
    return _template().render(
        appraisal=appraisal,
        style=Markup((_HERE / "style.css").read_text(encoding="utf-8")),
        plot_style=album.styles(),
        rows=summary.summary_rows(appraisal),
        in_short=summary.in_short(appraisal),
        gaps_found=gaps.gaps(appraisal),
        sections=[section for section in sections if section.stream.judged],
        without=[section for section in sections if not section.stream.judged],
    )


def _sections(album: Album, appraisal: Appraisal, tuned: dict[str, StreamTuning]) -> Iterator[Section]:
    for place, stream in enumerate(appraisal.streams):
        why = tuned.get(stream.stream)
        yield Section(
            summary.anchor(place),
            stream,
            tuple(_drawn_monitor(album, one) for one in stream.monitors),
            tuple(_drawn_groups(album, stream)),
            tuple(DrawnSearch(one, surface_plot(one.search)) for one in reasons.shown_searches(stream, why))
            if why
            else (),
            why.together if why else "",
        )


def _drawn_monitor(album: Album, monitor: MonitorAppraisal) -> DrawnMonitor:
    unit = words.in_a_plot(monitor.measured_in)
    return DrawnMonitor(monitor, trace_plot(album, monitor, unit) if monitor.trace.day else None)


def _drawn_groups(album: Album, stream: StreamAppraisal) -> Iterator[DrawnGroup]:
    watched = bool(stream.monitors)
    faults = stream.judged.faults if stream.judged else ()
    for group in fault_groups(faults, words.in_a_plot(stream.unit)):
        yield DrawnGroup(
            group,
            unreliable_plot(album, group, watched=watched),
            until_plot(album, group, stream.horizon_days, watched=watched),
            first_event_plot(album, group, watched=watched),
        )


@cache
def _template() -> Template:
    made = environment()
    made.globals.update(
        {"summary": summary, "gaps": gaps, "errors": fault_words, "monitors": monitor_words, "reasons": reasons}
    )
    return made.get_template("appraisal.html")


def environment() -> Environment:
    """Where a page's template finds its files and how it writes text: escaped, printable, a missing name an error."""
    made = Environment(
        loader=FileSystemLoader(_HERE),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        finalize=_printable,
    )
    made.globals.update({"words": words})
    return made


def _printable(value: Any) -> Any:
    return words.printable(value) if isinstance(value, str) and not isinstance(value, Markup) else value
