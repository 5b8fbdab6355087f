"""How the plots look: the three ways of finding an error, told by line style, marker and a name at the line (colour only repeats it).

Also the sheet with its axes, and what is drawn on every axis of error sizes.
"""

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure as Canvas
from matplotlib.ticker import FuncFormatter, MaxNLocator

from pbm.io.report.groups import FaultGroup
from pbm.io.report.labels import Points
from pbm.io.report.svg import LOOK

_INCHES = (4.3, 3.05)
_FRAME = (0.158, 0.165, 0.815, 0.8)
STEPS = (1, 2, 2.5, 5, 10)
BAND, INK, MUTED, GROUND = 0.16, "#1d1d1b", "#8a8a86", "#efede6"


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


def sheet(across: str, along: str) -> tuple[Canvas, Axes]:
    """An empty plot with named axes."""
    canvas = Canvas(figsize=_INCHES)
    axes = canvas.add_axes(_FRAME)
    axes.set_xlabel(across)
    axes.set_ylabel(along)
    axes.xaxis.set_label_coords(0.5, -0.11)
    axes.yaxis.set_label_coords(-0.135, 0.5)
    return canvas, axes


def draw_line(axes: Axes, group: FaultGroup, look: Look, xs: Points, ys: Points) -> tuple[Points, ...]:
    """A line over error sizes, downwards and upwards apart; its parts, each of points (n, 2)."""
    for part in group.parts:
        axes.plot(xs[part], ys[part], color=look.colour, linestyle=look.dash, marker=look.marker, markeredgewidth=0)
    return tuple(np.column_stack([xs[part], ys[part]]) for part in group.parts)


def draw_band(axes: Axes, group: FaultGroup, look: Look, low: Points, high: Points, *, edged: bool = False) -> None:
    """A band over error sizes; where there is one size only, a stroke. Edged, it can be told from another in grey."""
    xs = np.array(group.sizes)
    for part in group.parts:
        axes.fill_between(xs[part], low[part], high[part], color=look.colour, alpha=BAND, linewidth=0)
        if part.stop - part.start == 1:
            axes.vlines(xs[part], low[part], high[part], color=look.colour, linewidth=1.0)
        elif edged:
            for edge in (low, high):
                axes.plot(xs[part], edge[part], color=look.colour, linestyle=look.dash, linewidth=0.6)


def finish_sizes(axes: Axes, group: FaultGroup) -> None:
    """Limits and ticks of the axis of sizes."""
    first, last = min(group.sizes), max(group.sizes)
    margin = 0.06 * ((last - first) or 1)
    axes.set_xlim(first - margin, last + margin)
    axes.xaxis.set_major_locator(MaxNLocator(9, steps=STEPS))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda size, _: tick(size, signed=first < 0)))


def finish_counts(axes: Axes) -> None:
    """Ticks of an axis of counts."""
    axes.yaxis.set_major_locator(MaxNLocator(7, steps=STEPS))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda count, _: tick(count)))


def tick(value: float, signed: bool = False) -> str:
    """A number beside an axis."""
    sign = "+" if signed and value > 0 else ""
    return f"{sign}{value:,.10g}".replace(",", "\u202f").replace("-", "−")
