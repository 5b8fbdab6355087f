"""Names written beside lines: each at the place near its own line where it is farthest from the others."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

Points = NDArray[np.float64]
_SIZE = 8.0
_FAR, _STEP, _TOUCH = 20.0, 3.0, 1.5
_WIDTH, _HEIGHT, _AWAY = (
    0.58 * _SIZE,
    1.25 * _SIZE,
    5.0,
)  # a letter's width, a line's height, distance from the line: points

_NO_POINTS = np.empty((0, 2))
_SIDES = np.array([(0, 1), (0, -1), (1, 0), (-1, 0), (0.6, 1), (-0.6, 1), (0.6, -1), (-0.6, -1)])


@dataclass(frozen=True, slots=True)
class Line:
    """A line already drawn: its name, its colour, and its parts, each of points (n, 2) in data coordinates."""

    name: str
    colour: str
    parts: tuple[Points, ...]


def write_names(axes: Axes, lines: Sequence[Line], beside: Sequence[Points] = ()) -> None:
    """Write each line's name on the axes, whose limits must be final; `beside` are other points (n, 2) to keep clear of."""
    scale = 72 / axes.figure.dpi
    drawn = [np.vstack([_dense(axes.transData.transform(part) * scale) for part in line.parts]) for line in lines]
    others = [axes.transData.transform(points) * scale for points in beside]
    frame = np.array(axes.get_window_extent().extents) * scale
    for place, line in enumerate(lines):
        own, taken = drawn[place], np.vstack([_NO_POINTS, *drawn[:place], *drawn[place + 1 :], *others])
        boxes = _boxes(own, len(line.name))
        box = boxes[np.argmax(_room(boxes, own, taken, frame))]
        others.append(_grid(box))
        x, y = axes.transData.inverted().transform((box[:2] + box[2:]) / 2 / scale)
        axes.text(x, y, line.name, color=line.colour, fontsize=_SIZE, ha="center", va="center", weight="bold")


def _dense(points: Points) -> Points:
    """The line itself, as points a few points of paper apart."""
    along = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(points, axis=0).T))])
    steps = np.linspace(0, along[-1], 2 + int(along[-1] / _STEP))
    return np.column_stack([np.interp(steps, along, points[:, 0]), np.interp(steps, along, points[:, 1])])


def _boxes(points: Points, letters: int) -> Points:
    """Places for a name around points of its line, above, below and to either side: left, bottom, right, top; (b, 4)."""
    half = np.array([letters * _WIDTH / 2, _HEIGHT / 2])
    near = points[:: max(1, len(points) // 24)]
    middles = (near[:, None, :] + _SIDES[None, :, :] * (half + _AWAY)).reshape(-1, 2)
    return np.hstack([middles - half, middles + half])


def _grid(box: Points) -> Points:
    """Points that stand for a name already written."""
    xs, ys = np.linspace(box[0], box[2], 9), np.linspace(box[1], box[3], 3)
    return np.column_stack([np.tile(xs, 3), np.repeat(ys, 9)])


def _room(boxes: Points, own: Points, others: Points, frame: Points) -> Points:
    """How well a name stands in each box: inside the frame, on no line, and away from every line but its own; (b,)."""
    from_own, from_others = _distance(boxes, own), _distance(boxes, others)
    covered = (from_own < _TOUCH).sum(axis=1) + (from_others < _TOUCH).sum(axis=1)
    outside = np.maximum(frame[:2] - boxes[:, :2], 0).sum(axis=1) + np.maximum(boxes[:, 2:] - frame[2:], 0).sum(axis=1)
    room: Points = np.minimum(from_others.min(axis=1, initial=_FAR), _FAR) - 10 * covered - 100 * outside
    return room


def _distance(boxes: Points, points: Points) -> Points:
    """Distance of each point from each box, 0 inside; (b, n)."""
    beyond = [
        np.maximum(np.maximum(boxes[:, None, i] - points[None, :, i], points[None, :, i] - boxes[:, None, i + 2]), 0)
        for i in (0, 1)
    ]
    return np.hypot(*beyond)
