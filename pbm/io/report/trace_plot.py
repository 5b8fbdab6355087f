"""The in-control trace: the statistic on held-out days with its limits; where it leaves them is marked."""

import math

import numpy as np
from markupsafe import Markup
from matplotlib.axes import Axes
from matplotlib.ticker import MaxNLocator

from pbm.io.report import look, seen
from pbm.io.report.labels import Points
from pbm.io.report.monitor_words import ends, is_transformed, level
from pbm.io.report.svg import Album
from pbm.records.appraisal import MonitorAppraisal

_NAME_PLACES = (
    ("right", 0.99, 0.8),
    ("left", 0.01, 0.2),
    ("center", 0.5, 0.5),
)  # alignment, anchor, middle of the name


def trace_plot(album: Album, monitor: MonitorAppraisal, unit: str) -> Markup:
    """The statistic with its limits and centre."""
    canvas, axes = look.sheet("day of the held-out history", _scale_in_words(monitor, unit))
    days, low, high = (np.array(one) for one in (monitor.trace.day, monitor.trace.lowest, monitor.trace.highest))
    axes.fill_between(days, low, high, color=look.INK, linewidth=0.5, alpha=0.75)
    limits = ends(monitor.limits)
    marked = _mark_beyond(axes, days, low, high, limits)
    shown = [one for one in (*limits, monitor.scale_centre) if math.isfinite(one)]
    width = max(high.max(), *shown) - min(low.min(), *shown)
    axes.set_xlim(days[0], days[-1] if days[-1] > days[0] else days[0] + 1)
    axes.set_ylim(min(low.min(), *shown) - 0.14 * width, max(high.max(), *shown) + 0.14 * width)
    for value, name, up in ((limits[0], "lower limit", False), (limits[1], "upper limit", True)):
        if math.isfinite(value):
            _limit(axes, value, f"{name} {level(value, monitor.limits)}", up, _freest(marked[up], days))
    axes.axhline(monitor.scale_centre, color=look.MUTED, linewidth=0.9, linestyle=(0, (1, 2)))
    axes.yaxis.set_major_locator(MaxNLocator(6, steps=look.STEPS))
    return album.inline(canvas, seen.trace(monitor, unit))


def _freest(marked: Points, days: Points) -> tuple[str, float]:
    """Where along a limit the fewest marks stand, so that its name can."""
    along = (marked - days[0]) / ((days[-1] - days[0]) or 1)
    return min(_NAME_PLACES, key=lambda place: int((abs(along - place[2]) < 0.17).sum()))[:2]


def _scale_in_words(monitor: MonitorAppraisal, unit: str) -> str:
    return "statistic, transformed scale" if is_transformed(monitor) else f"statistic, {unit}"


def _limit(axes: Axes, value: float, text: str, up: bool, place: tuple[str, float]) -> None:
    axes.axhline(value, color=look.BOTH.colour, linewidth=1.2, linestyle=look.BOTH.dash)
    side, across = place
    axes.annotate(
        text,
        (across, value),
        xycoords=("axes fraction", "data"),
        xytext=(0, 2 if up else -2),
        textcoords="offset points",
        ha=side,
        va="bottom" if up else "top",
        color=look.BOTH.colour,
        fontsize=8,
        weight="bold",
    )


def _mark_beyond(
    axes: Axes, days: Points, low: Points, high: Points, limits: tuple[float, float]
) -> tuple[Points, Points]:
    """Mark where the statistic leaves its limits; the days below and the days above them."""
    below, above = low < limits[0], high > limits[1]
    for beyond, height, marker in ((below, low, "v"), (above, high, "^")):
        axes.plot(
            days[beyond], height[beyond], linestyle="none", marker=marker, color=look.MONITOR.colour, markersize=5
        )
    return days[below], days[above]
