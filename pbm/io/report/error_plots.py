"""Against error size: expected unreliable results, and the chance that the first control event or an alarm before it finds the error."""

from collections.abc import Callable

import numpy as np
from markupsafe import Markup
from matplotlib.axes import Axes

from pbm.io.report import seen
from pbm.io.report.groups import FaultGroup
from pbm.io.report.labels import Line, write_names
from pbm.io.report.look import ALONE, BOTH, MONITOR, Look, draw_band, draw_line, finish_counts, finish_sizes, sheet
from pbm.io.report.svg import Album
from pbm.records.figures import Figure
from pbm.records.judged import FaultAppraisal

Way = tuple[Look, Callable[[FaultAppraisal], Figure]]


def unreliable_plot(album: Album, group: FaultGroup, *, watched: bool) -> Markup:
    """Expected unreliable results, with the controls alone and, where the stream is watched, with the monitor; each with its interval."""
    canvas, axes = sheet(group.axis, "expected unreliable results")
    ways: list[Way] = [(ALONE, lambda fault: fault.unreliable.alone)]
    ways += [(BOTH, lambda fault: fault.unreliable.with_monitor)] * watched
    lines = [_figure_line(axes, group, look, which) for look, which in ways]
    axes.set_ylim(0, 1.18 * max(which(fault).high for _, which in ways for fault in group.faults) or 1)
    finish_sizes(axes, group)
    finish_counts(axes)
    write_names(axes, lines)
    return album.inline(canvas, seen.unreliable(group, watched=watched))


def first_event_plot(album: Album, group: FaultGroup, *, watched: bool) -> Markup:
    """Probability that the error is found no later than the first control event: by the controls, the monitor, and both."""
    canvas, axes = sheet(group.axis, "found by the first control event")
    ways: list[Way] = [(ALONE, lambda fault: fault.by_first_event.schedule)]
    if watched:
        ways += [(MONITOR, lambda fault: fault.by_first_event.monitor), (BOTH, lambda fault: fault.by_first_event.both)]
    lines = [_figure_line(axes, group, look, which) for look, which in ways]
    axes.set_ylim(-0.02, 1.14)
    axes.set_yticks([0, 0.25, 0.5, 0.75, 1], ["0 %", "25 %", "50 %", "75 %", "100 %"])
    finish_sizes(axes, group)
    write_names(axes, lines)
    return album.inline(canvas, seen.first_event(group, watched=watched))


def _figure_line(axes: Axes, group: FaultGroup, look: Look, which: Callable[[FaultAppraisal], Figure]) -> Line:
    """A figure against error size with its interval band."""
    figures = [which(fault) for fault in group.faults]
    value, low, high = (np.array([getattr(one, part) for one in figures]) for part in ("value", "low", "high"))
    draw_band(axes, group, look, low, high)
    return Line(look.name, look.colour, draw_line(axes, group, look, np.array(group.sizes), value))
