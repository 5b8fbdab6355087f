"""Affected results until detection against error size: median, and the band in which 5 to 95 % of the errors are found.

The axis of counts is logarithmic, with a strip above it for what is not found within the horizon.
"""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from markupsafe import Markup
from matplotlib.axes import Axes
from matplotlib.ticker import NullLocator

from pbm.io.report import seen, words
from pbm.io.report.groups import FaultGroup
from pbm.io.report.labels import Line, write_names
from pbm.io.report.look import ALONE, BOTH, GROUND, MONITOR, Look, draw_band, draw_line, finish_sizes, sheet
from pbm.io.report.svg import Album
from pbm.records.figures import Percentile, Until
from pbm.records.judged import FaultAppraisal

_LEAST, _STRIP = 0.9, 0.13
_ROOM = 0.06  # share of the axis below the strip that the strip's own name needs
Which = Callable[[FaultAppraisal], Until]


def until_plot(album: Album, group: FaultGroup, horizon_days: float, *, watched: bool) -> Markup:
    """Median by the controls, the monitor, and both; the band of the controls alone and of both."""
    canvas, axes = sheet(group.axis, "affected results until detection")
    ways: list[tuple[Look, Which]] = [(ALONE, lambda fault: fault.until.schedule)]
    if watched:
        ways += [(MONITOR, lambda fault: fault.until.monitor), (BOTH, lambda fault: fault.until.both)]
    scale = _UntilScale.over([which(fault) for _, which in ways for fault in group.faults])
    scale.prepare(axes, horizon_days)
    lines = [_until_line(axes, group, look, which, scale) for look, which in ways]
    finish_sizes(axes, group)
    write_names(axes, lines)
    return album.inline(canvas, seen.until(group, horizon_days, watched=watched))


@dataclass(frozen=True, slots=True)
class _UntilScale:
    """A logarithmic axis of counts up to `top`, with a strip above it, `never` in its middle, for what the horizon cuts off."""

    top: float
    never: float
    used: bool

    @classmethod
    def over(cls, untils: Sequence[Until]) -> "_UntilScale":
        counts = [one.value for until in untils for one in (until.p5, until.median, until.p95)]
        top = 1.6 * max([10.0, *(count for count in counts if count is not None)])
        return cls(top, top * (top / _LEAST) ** (_STRIP / 2), None in counts)

    @property
    def ceiling(self) -> float:
        """Where the axis ends."""
        return self.never**2 / self.top if self.used else self.top

    def height(self, count: Percentile) -> float:
        """Where a count is drawn."""
        return self.never if count.value is None else max(count.value, 1.0)

    def prepare(self, axes: Axes, horizon_days: float) -> None:
        """Scale, ticks and strip."""
        axes.set_yscale("log")
        axes.set_ylim(_LEAST, self.ceiling)
        highest = self.top * (_LEAST / self.top) ** _ROOM if self.used else self.top
        ticks = [10.0**power for power in range(math.floor(math.log10(highest)) + 1)]
        names = [words.whole(round(tick)) for tick in ticks]
        if self.used:
            ticks.append(self.never)
            names.append(f"not within\n{words.days(horizon_days)}")
            axes.axhspan(self.top, self.ceiling, color=GROUND, linewidth=0)
        axes.set_yticks(ticks, names)
        axes.yaxis.set_minor_locator(NullLocator())


def _until_line(axes: Axes, group: FaultGroup, look: Look, which: Which, scale: _UntilScale) -> Line:
    found = [which(fault) for fault in group.faults]
    p5, median, p95 = (
        np.array([scale.height(getattr(one, part)) for one in found]) for part in ("p5", "median", "p95")
    )
    if look is not MONITOR:  # a third band would hide the other two; the table tells it
        draw_band(axes, group, look, p5, p95, edged=True)
    return Line(look.name, look.colour, draw_line(axes, group, look, np.array(group.sizes), median))
