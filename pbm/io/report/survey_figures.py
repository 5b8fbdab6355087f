"""The plots of a surveyed stream: volume by hour of the week, distribution, daily medians with months, autocorrelation."""

import math
from datetime import date, timedelta

import numpy as np
from markupsafe import Markup, escape
from matplotlib.axes import Axes
from matplotlib.figure import Figure as Canvas
from matplotlib.ticker import MaxNLocator

from pbm.io.report import words
from pbm.io.report.svg import Album
from pbm.records.survey import Dependence, Distribution, StreamSurvey, Volume

_INCHES, _STRIP_INCHES = (4.3, 2.6), (8.8, 2.05)
_FRAME, _STRIP_FRAME = (0.158, 0.185, 0.815, 0.775), (0.062, 0.2, 0.93, 0.7)
_INK, _PETROL, _RUST, _MUTED = "#1d1d1b", "#0a5c6b", "#a8500b", "#8a8a86"
_DAYS = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")
_MONTHS_SHOWN = 14
_ROOM_FOR_A_NAME = 0.95
_LEFT, _WIDE, _TOP = 34, 26, 19


def volume_plot(volume: Volume) -> Markup:
    """A strip for each weekday, a field for each hour: the darker, the more results; the count is written in it.

    168 fields are written as they are: matplotlib takes half a second to lay them out.
    """
    most = max(volume.by_hour_of_week) or 1.0
    fields = [_field(place, rate, rate / most) for place, rate in enumerate(volume.by_hour_of_week)]
    days = [_text(_LEFT - 5, _TOP * day + 13, name, "end") for day, name in enumerate(_DAYS)]
    hours = [_text(_LEFT + _WIDE * hour, 7 * _TOP + 14, str(hour), "middle") for hour in range(0, 25, 3)]
    box = f"0 0 {_LEFT + 24 * _WIDE + 8} {7 * _TOP + 20}"
    label = escape(seen_volume(volume))
    return Markup('<svg class="plot heat" viewBox="{}" role="img" aria-label="{}">{}</svg>').format(
        box, label, Markup("").join([*fields, *days, *hours])
    )


def _field(place: int, rate: float, share: float) -> Markup:
    x, y = _LEFT + place % 24 * _WIDE, place // 24 * _TOP
    rect = Markup('<rect x="{}" y="{}" width="{}" height="{}" fill-opacity="{}"/>').format(
        x, y, _WIDE, _TOP, f"{0.9 * share:.2f}"
    )
    return rect + _text(x + _WIDE // 2, y + 13, _short(rate), "middle", "over" if share > 0.8 else "")


def _text(x: int, y: int, text: str, anchor: str, name: str = "") -> Markup:
    kind = Markup(' class="{}"').format(name) if name else ""
    return Markup('<text x="{}" y="{}" text-anchor="{}"{}>{}</text>').format(x, y, anchor, kind, text)


def _short(rate: float) -> str:
    return f"{rate:.0f}" if rate >= 9.95 else f"{rate:.1f}".removesuffix(".0")


def seen_volume(volume: Volume) -> str:
    """The strip in words."""
    rates = volume.by_hour_of_week
    top = max(range(168), key=lambda hour: rates[hour])
    return (
        f"Mean results in each hour of the week. Most on {_DAYS[top // 24]} from {top % 24}:00, {words.number(rates[top])}. "
        f"A day: {', '.join(f'{name} {words.number(count)}' for name, count in zip(_DAYS, volume.by_weekday, strict=True))}."
    )


def distribution_plot(
    album: Album, distribution: Distribution, limits: tuple[float | None, float | None], unit: str
) -> Markup:
    """Counts of the middle 99 %, and the suggested truncation limits."""
    canvas, axes = _sheet(unit, "results")
    edges, counts = np.array(distribution.histogram.edges), np.array(distribution.histogram.counts)
    axes.stairs(counts, edges, fill=True, color=_PETROL, alpha=0.35)
    axes.stairs(counts, edges, color=_PETROL, linewidth=0.9)
    top = 1.16 * (counts.max() or 1)
    axes.vlines(distribution.median, 0, 0.93 * top, color=_INK, linewidth=1.1)
    at_the_axis = distribution.median - edges[0] < 0.15 * (edges[-1] - edges[0])
    axes.text(
        distribution.median,
        0.94 * top,
        f"median {distribution.median:.4g}",
        ha="left" if at_the_axis else "center",
        va="bottom",
        fontsize=8,
    )
    inside = [limit for limit in limits if limit is not None and edges[0] < limit < edges[-1]]
    axes.vlines(inside, 0, 0.8 * top, color=_RUST, linewidth=1.1, linestyle=(0, (4, 2)))
    for limit in inside:
        axes.text(limit, 0.81 * top, f"{limit:g}", ha="center", va="bottom", fontsize=8, color=_RUST)
    axes.set_xlim(edges[0], edges[-1])
    axes.set_ylim(0, top)
    axes.yaxis.set_major_locator(MaxNLocator(5, integer=True))
    axes.xaxis.set_major_locator(MaxNLocator(8))
    return album.inline(canvas, seen_distribution(distribution, unit))


def seen_distribution(distribution: Distribution, unit: str) -> str:
    """The distribution in words."""
    return (
        f"Counts of results. Median {words.number(distribution.median)} {unit}; the middle 95 % from {words.number(distribution.p2_5)} to "
        f"{words.number(distribution.p97_5)}; lowest {words.number(distribution.lowest)}, highest {words.number(distribution.highest)}."
    )


def medians_plot(album: Album, stream: StreamSurvey, unit: str) -> Markup | None:
    """Daily medians, and what each month's median was; the days that tune holds out stand on a ground of their own."""
    medians = np.array([math.nan if one is None else one for one in stream.daily_medians])
    if not np.isfinite(medians).any():
        return None
    canvas, axes = _sheet("", f"daily median, {unit}", _STRIP_INCHES, _STRIP_FRAME)
    days = np.arange(len(medians))
    first = date.fromisoformat(stream.volume.first_day)
    low, high = float(np.nanmin(medians)), float(np.nanmax(medians))
    room = 0.08 * (high - low) or 0.5 * (abs(high) or 1.0)
    if stream.later_third is not None:
        held = (date.fromisoformat(stream.later_third.first_day) - first).days
        axes.axvspan(held - 0.5, len(days) - 0.5, color="#efede6", linewidth=0)
    axes.plot(days, medians, color=_INK, linewidth=0.8, marker=".", markersize=2.5)
    ticks, names = [], []
    for month in stream.months:
        begin = (date.fromisoformat(f"{month.month}-01") - first).days
        end = (_next_month(date.fromisoformat(f"{month.month}-01")) - first).days
        left, right = max(begin, 0) - 0.5, min(end, len(days)) - 0.5
        shown = min(max(month.median, low - room), high + room)
        axes.hlines(shown, left, right, color=_RUST, linewidth=2.0)
        if left < _ROOM_FOR_A_NAME * len(days):
            ticks.append(left)
            names.append(month.month)
    every = max(1, math.ceil(len(ticks) / _MONTHS_SHOWN))
    axes.set_xticks(ticks[::every], names[::every], ha="left")
    axes.set_xlim(-0.5, len(days) - 0.5)
    axes.set_ylim(low - room, high + room)
    axes.yaxis.set_major_locator(MaxNLocator(5))
    return album.inline(canvas, seen_medians(stream, low, high, unit))


def _next_month(first: date) -> date:
    return (first + timedelta(32)).replace(day=1)


def seen_medians(stream: StreamSurvey, low: float, high: float, unit: str) -> str:
    """The trace in words."""
    return (
        f"Daily medians over {len(stream.daily_medians)} days, between {words.number(low)} and {words.number(high)} {unit}; by month "
        f"{', '.join(words.number(month.median) for month in stream.months)}."
    )


def autocorrelation_plot(album: Album, dependence: Dependence) -> Markup | None:
    """Autocorrelation of successive admitted results."""
    r = np.array(dependence.autocorrelation)
    if not len(r):
        return None
    canvas, axes = _sheet("results apart", "autocorrelation")
    lags = np.arange(1, len(r) + 1)
    axes.vlines(lags, 0, r, color=_PETROL, linewidth=1.6)
    axes.axhline(0, color=_MUTED, linewidth=0.8)
    axes.set_xlim(0, len(r) + 1)
    axes.set_ylim(min(-0.05, 1.1 * float(r.min())), max(0.2, 1.1 * float(r.max())))
    axes.yaxis.set_major_locator(MaxNLocator(5))
    return album.inline(
        canvas,
        f"Autocorrelation at 1 to {len(r)} results apart: {words.number(float(r[0]))} at 1, greatest {words.number(float(r.max()))}.",
    )


def _sheet(
    across: str,
    along: str,
    inches: tuple[float, float] = _INCHES,
    frame: tuple[float, float, float, float] = _FRAME,
) -> tuple[Canvas, Axes]:
    canvas = Canvas(figsize=inches)
    axes = canvas.add_axes(frame)
    axes.set_xlabel(across)
    axes.set_ylabel(along, labelpad=1)
    return canvas, axes
