"""The report: an appraisal laid out as one HTML page. It sorts, formats and draws what the record holds, and computes nothing else."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from jinja2 import Environment, FileSystemLoader, StrictUndefined, Template
from markupsafe import Markup

from pbm.io.atomic import replace_file
from pbm.io.report import figures, fleet, words
from pbm.io.report.groups import FaultGroup, fault_groups
from pbm.io.report.shown import ShownMonitor, shown
from pbm.io.report.svg import Album
from pbm.records.appraisal import Appraisal, StreamAppraisal
from pbm.records.judged import FaultAppraisal

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
    """A monitor and its plots; no trace where the appraisal holds none."""

    appraisal: ShownMonitor
    trace: Markup | None
    groups: tuple[DrawnGroup, ...]

    @property
    def faults(self) -> tuple[FaultAppraisal, ...]:
        """The errors tried, in the order in which they are drawn."""
        return tuple(fault for drawn in self.groups for fault in drawn.group.faults)


@dataclass(frozen=True, slots=True)
class Section:
    """A stream with its drawn monitors, and where on the page it stands."""

    anchor: str
    stream: StreamAppraisal
    monitors: tuple[DrawnMonitor, ...]


def write_report(path: Path, appraisal: Appraisal) -> None:
    """Write the report; the same appraisal gives the same bytes.

    Parameters
    ----------
    path
        The HTML file; its folder must exist.
    appraisal
        What was found.
    """
    replace_file(path, report(appraisal).encode("utf-8"))


def report(appraisal: Appraisal) -> str:
    """The report as HTML text: no script, nothing loaded from elsewhere."""
    album = Album()
    with figures.drawing():
        sections = list(_sections(album, appraisal))
    return _template().render(
        appraisal=appraisal,
        style=Markup((_HERE / "style.css").read_text(encoding="utf-8")),
        plot_style=album.styles(),
        rows=fleet.fleet_rows(appraisal),
        in_short=fleet.in_short(appraisal),
        gaps=fleet.gaps(appraisal),
        sections=[section for section in sections if section.monitors],
        without=[section for section in sections if not section.monitors],
    )


def _sections(album: Album, appraisal: Appraisal) -> Iterator[Section]:
    for place, stream in enumerate(appraisal.streams):
        yield Section(fleet.anchor(place), stream, tuple(_drawn(album, stream, monitor) for monitor in shown(stream)))


def _drawn(album: Album, stream: StreamAppraisal, monitor: ShownMonitor) -> DrawnMonitor:
    unit = words.in_a_plot(stream.unit)
    trace = figures.trace_plot(album, monitor, unit) if monitor.trace.day else None
    groups = fault_groups(monitor.faults, unit)
    return DrawnMonitor(monitor, trace, tuple(_drawn_group(album, group, stream.horizon_days) for group in groups))


def _drawn_group(album: Album, group: FaultGroup, horizon_days: float) -> DrawnGroup:
    return DrawnGroup(
        group,
        figures.unreliable_plot(album, group),
        figures.until_plot(album, group, horizon_days),
        figures.first_event_plot(album, group),
    )


@cache
def _template() -> Template:
    return environment().get_template("template.html")


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
    made.globals.update({"words": words, "fleet": fleet})
    return made


def _printable(value: Any) -> Any:
    return words.printable(value) if isinstance(value, str) and not isinstance(value, Markup) else value
