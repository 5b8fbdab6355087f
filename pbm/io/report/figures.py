"""The four plots of a monitor: in-control trace, expected unreliable results, results until detection, detection by the first event.

Who finds the error is told by line style, marker and a name at the line; colour only repeats it.
"""

import math
import warnings
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass

import matplotlib
import numpy as np
from markupsafe import Markup
from matplotlib.axes import Axes
from matplotlib.figure import Figure as Canvas
from matplotlib.ticker import FuncFormatter, MaxNLocator, NullLocator

from pbm.io.report import seen, words
from pbm.io.report.groups import FaultGroup
from pbm.io.report.labels import Line, Points, write_names
from pbm.io.report.shown import ShownMonitor
from pbm.io.report.svg import LOOK, Album
from pbm.records.figures import Figure, Until
from pbm.records.judged import FaultAppraisal

_INCHES = (4.3, 3.05)
_FRAME = (0.158, 0.165, 0.815, 0.8)
_BAND, _INK, _MUTED = 0.16, "#1d1d1b", "#8a8a86"
_DODGE = 0.011
_STEPS = (1, 2, 2.5, 5, 10)
_NAME_PLACES = (
    ("right", 0.99, 0.8),
    ("left", 0.01, 0.2),
    ("center", 0.5, 0.5),
)  # alignment, anchor, middle of the name
_LEAST, _STRIP = 0.9, 0.13


@dataclass(frozen=True, slots=True)
class Look:
    """How one way of finding the error is drawn."""

    name: str
    colour: str
    dash: str | tuple[int, tuple[float, ...]]
    marker: str


ALONE = Look("controls alone", "#3f3f3c", "-", "o")
MONITOR = Look("monitor alone", "#a8500b", (0, (1.2, 1.4)), "^")
BOTH = Look("controls + monitor", "#0a5c6b", (0, (5.0, 1.8)), "s")


@contextmanager
def drawing() -> Iterator[None]:
    """Everything is drawn inside this, whatever the reader's own matplotlib settings are."""
    with matplotlib.rc_context(), warnings.catch_warnings():
        # The page's own fonts show what matplotlib's font lacks.
        warnings.filterwarnings("ignore", "Glyph .* missing from font")
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(LOOK)
        yield


def trace_plot(album: Album, monitor: ShownMonitor, unit: str) -> Markup:
    """The statistic on held-out days with its limits; where it leaves them is marked."""
    canvas, axes = _sheet("day of the held-out history", _scale_in_words(monitor, unit))
    days, low, high = (np.array(one) for one in (monitor.trace.day, monitor.trace.lowest, monitor.trace.highest))
    axes.fill_between(days, low, high, color=_INK, linewidth=0.5, alpha=0.75)
    marked = _mark_beyond(axes, days, low, high, monitor.limits)
    ends = [one for one in monitor.limits if math.isfinite(one)]
    width = max(high.max(), *ends) - min(low.min(), *ends)
    axes.set_xlim(days[0], days[-1] if days[-1] > days[0] else days[0] + 1)
    axes.set_ylim(min(low.min(), *ends) - 0.14 * width, max(high.max(), *ends) + 0.14 * width)
    for value, name, up in ((monitor.limits[0], "lower limit", False), (monitor.limits[1], "upper limit", True)):
        if math.isfinite(value):
            _limit(axes, value, f"{name} {words.level(value, *monitor.limits)}", up, _freest(marked[up], days))
    axes.axhline(monitor.scale_centre, color=_MUTED, linewidth=0.9, linestyle=(0, (1, 2)))
    axes.yaxis.set_major_locator(MaxNLocator(6, steps=_STEPS))
    return album.inline(canvas, seen.trace(monitor, unit))


def _freest(marked: Points, days: Points) -> tuple[str, float]:
    """Where along a limit the fewest marks stand, so that its name can."""
    along = (marked - days[0]) / ((days[-1] - days[0]) or 1)
    return min(_NAME_PLACES, key=lambda place: int((abs(along - place[2]) < 0.17).sum()))[:2]


def _scale_in_words(monitor: ShownMonitor, unit: str) -> str:
    return f"statistic, {unit}" if monitor.limits == (monitor.low, monitor.high) else "statistic, transformed scale"


def _limit(axes: Axes, value: float, text: str, up: bool, place: tuple[str, float]) -> None:
    axes.axhline(value, color=BOTH.colour, linewidth=1.2, linestyle=BOTH.dash)
    side, across = place
    axes.annotate(
        text,
        (across, value),
        xycoords=("axes fraction", "data"),
        xytext=(0, 2 if up else -2),
        textcoords="offset points",
        ha=side,
        va="bottom" if up else "top",
        color=BOTH.colour,
        fontsize=8,
        weight="bold",
    )


def _mark_beyond(
    axes: Axes, days: Points, low: Points, high: Points, limits: tuple[float, float]
) -> tuple[Points, Points]:
    """Mark where the statistic leaves its limits; the days below and the days above them."""
    below, above = low < limits[0], high > limits[1]
    for beyond, level, marker in ((below, low, "v"), (above, high, "^")):
        axes.plot(days[beyond], level[beyond], linestyle="none", marker=marker, color=MONITOR.colour, markersize=5)
    return days[below], days[above]


def unreliable_plot(album: Album, group: FaultGroup) -> Markup:
    """Expected unreliable results against error size, controls alone and with the monitor, each with its interval."""
    canvas, axes = _sheet(group.axis, "expected unreliable results")
    ways: tuple[tuple[Look, Callable[[FaultAppraisal], Figure]], ...] = (
        (ALONE, lambda fault: fault.unreliable.alone),
        (BOTH, lambda fault: fault.unreliable.with_monitor),
    )
    lines = [_figure_line(axes, group, look, which) for look, which in ways]
    axes.set_ylim(0, 1.18 * max(which(fault).high for _, which in ways for fault in group.faults) or 1)
    _finish(axes, group)
    write_names(axes, lines)
    return album.inline(canvas, seen.unreliable(group.faults, group.unit))


def first_event_plot(album: Album, group: FaultGroup) -> Markup:
    """Probability that the error is found no later than the first control event, by the controls, the monitor, and both."""
    canvas, axes = _sheet(group.axis, "found by the first control event")
    ways: tuple[tuple[Look, Callable[[FaultAppraisal], Figure]], ...] = (
        (ALONE, lambda fault: fault.by_first_event.schedule),
        (MONITOR, lambda fault: fault.by_first_event.monitor),
        (BOTH, lambda fault: fault.by_first_event.both),
    )
    lines = [_figure_line(axes, group, look, which) for look, which in ways]
    axes.set_ylim(-0.02, 1.14)
    axes.set_yticks([0, 0.25, 0.5, 0.75, 1], ["0 %", "25 %", "50 %", "75 %", "100 %"])
    _finish(axes, group, formatted=False)
    write_names(axes, lines)
    return album.inline(canvas, seen.first_event(group.faults, group.unit))


def until_plot(album: Album, group: FaultGroup, horizon_days: float) -> Markup:
    """Affected results until detection: the median and up to the 95th percentile, by the controls, the monitor, and both."""
    canvas, axes = _sheet(group.axis, "affected results until detection")
    ways: tuple[tuple[Look, Callable[[FaultAppraisal], Until]], ...] = (
        (ALONE, lambda fault: fault.until.schedule),
        (MONITOR, lambda fault: fault.until.monitor),
        (BOTH, lambda fault: fault.until.both),
    )
    untils = [which(fault) for _, which in ways for fault in group.faults]
    scale = _UntilScale.over(untils)
    scale.prepare(axes, horizon_days)
    width = (group.sizes[-1] - group.sizes[0]) or 1
    drawn = [
        _until_line(axes, group, look, which, (place - 1) * _DODGE * width, scale)
        for place, (look, which) in enumerate(ways)
    ]
    _finish(axes, group, formatted=False)
    write_names(axes, [line for line, _ in drawn], [whiskers for _, whiskers in drawn])
    return album.inline(canvas, seen.until(group.faults, group.unit, horizon_days))


@dataclass(frozen=True, slots=True)
class _UntilScale:
    """A logarithmic axis of counts up to `top`, with a strip above it, `never` in its middle, for what the horizon cuts off."""

    top: float
    never: float
    used: bool

    @classmethod
    def over(cls, untils: Sequence[Until]) -> "_UntilScale":
        counts = [count for until in untils for count in (until.median.value, until.p95.value)]
        top = 1.6 * max([10.0, *(count for count in counts if count is not None)])
        return cls(top, top * (top / _LEAST) ** (_STRIP / 2), None in counts)

    @property
    def ceiling(self) -> float:
        """Where the axis ends."""
        return self.never**2 / self.top if self.used else self.top

    def height(self, count: float | None) -> float:
        """Where a count is drawn."""
        return self.never if count is None else max(count, 1.0)

    def prepare(self, axes: Axes, horizon_days: float) -> None:
        """Scale, ticks and strip."""
        axes.set_yscale("log")
        axes.set_ylim(_LEAST, self.ceiling)
        ticks = [10.0**power for power in range(math.floor(math.log10(self.top)) + 1)]
        names = [words.whole(round(tick)) for tick in ticks]
        if self.used:
            ticks.append(self.never)
            names.append(f"not within\n{words.days(horizon_days)}")
            axes.axhspan(self.top, self.ceiling, color="#efede6", linewidth=0)
        axes.set_yticks(ticks, names)
        axes.yaxis.set_minor_locator(NullLocator())


def _until_line(
    axes: Axes,
    group: FaultGroup,
    look: Look,
    which: Callable[[FaultAppraisal], Until],
    aside: float,
    scale: _UntilScale,
) -> tuple[Line, Points]:
    xs = np.array(group.sizes) + aside
    median = np.array([scale.height(which(fault).median.value) for fault in group.faults])
    p95 = np.array([scale.height(which(fault).p95.value) for fault in group.faults])
    axes.vlines(xs, median, p95, color=look.colour, linewidth=1.0, alpha=0.8)
    axes.plot(xs, p95, linestyle="none", marker="_", markersize=5, color=look.colour)
    parts = _draw(axes, group, look, xs, median)
    return Line(look.name, look.colour, parts), np.column_stack(
        [np.tile(xs, 3), np.concatenate([p95, (median * p95) ** 0.5, median])]
    )


def _figure_line(axes: Axes, group: FaultGroup, look: Look, which: Callable[[FaultAppraisal], Figure]) -> Line:
    """A figure against error size with its interval band."""
    xs, figures = np.array(group.sizes), [which(fault) for fault in group.faults]
    value, low, high = (np.array([getattr(one, part) for one in figures]) for part in ("value", "low", "high"))
    for part in group.parts:
        axes.fill_between(xs[part], low[part], high[part], color=look.colour, alpha=_BAND, linewidth=0)
        if part.stop - part.start == 1:
            axes.vlines(xs[part], low[part], high[part], color=look.colour, linewidth=1.0)
    return Line(look.name, look.colour, _draw(axes, group, look, xs, value))


def _draw(axes: Axes, group: FaultGroup, look: Look, xs: Points, ys: Points) -> tuple[Points, ...]:
    for part in group.parts:
        axes.plot(xs[part], ys[part], color=look.colour, linestyle=look.dash, marker=look.marker, markeredgewidth=0)
    return tuple(np.column_stack([xs[part], ys[part]]) for part in group.parts)


def _sheet(across: str, along: str) -> tuple[Canvas, Axes]:
    canvas = Canvas(figsize=_INCHES)
    axes = canvas.add_axes(_FRAME)
    axes.set_xlabel(across)
    axes.set_ylabel(along)
    axes.xaxis.set_label_coords(0.5, -0.11)
    axes.yaxis.set_label_coords(-0.135, 0.5)
    return canvas, axes


def _finish(axes: Axes, group: FaultGroup, formatted: bool = True) -> None:
    """Limits and ticks of the axis of sizes."""
    first, last = min(group.sizes), max(group.sizes)
    margin = 0.06 * ((last - first) or 1)
    axes.set_xlim(first - margin, last + margin)
    axes.xaxis.set_major_locator(MaxNLocator(9, steps=_STEPS))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda size, _: _tick(size, signed=first < 0)))
    if formatted:
        axes.yaxis.set_major_locator(MaxNLocator(7, steps=_STEPS))
        axes.yaxis.set_major_formatter(FuncFormatter(lambda count, _: _tick(count)))


def _tick(value: float, signed: bool = False) -> str:
    sign = "+" if signed and value > 0 else ""
    return f"{sign}{value:,.10g}".replace(",", "\u202f").replace("-", "−")
