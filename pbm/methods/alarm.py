"""The alarm machine: one episode is one alarm.

An armed stream opens an episode when its statistic leaves [L, U]. The episode closes, and the stream is armed again, when the statistic
comes back inside the re-arm band centre +/- r (limit - centre). A statistic that is not judged (not a number) changes nothing.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from pbm.methods.jit import Floats, Integers, compiled

Sides = npt.NDArray[np.int8]
REARM = 0.5


class Limits(NamedTuple):
    """Control limits L < centre < U of a statistic and the re-arm share r (0 < r < 1)."""

    low: float
    high: float
    centre: float
    rearm: float


def judge(episode: int, s: float, low: float, high: float, centre: float, rearm: float) -> int:
    """The episode after a value of the statistic: 0 armed, +1 open above U, -1 open below L.

    Examples
    --------
    >>> episode = 0
    >>> [episode := judge(episode, s, -3.0, 3.0, 0.0, 0.5) for s in (2.9, 3.1, 2.0, 3.2, 1.4, 3.1)]
    [0, 1, 1, 1, 0, 1]
    """
    if episode == 0:
        return 1 if s > high else (-1 if s < low else 0)
    inside = centre + rearm * (low - centre) <= s <= centre + rearm * (high - centre)
    return 0 if inside else episode


@cache
def _alarms_loop() -> Callable[..., Any]:
    law = compiled(judge)

    def loop(path: Floats, low: float, high: float, centre: float, rearm: float, opened: Sides, peaks: Floats) -> int:
        found = 0
        episode = 0
        for i in range(len(path)):
            s = path[i]
            after = law(episode, s, low, high, centre, rearm)
            opened[i] = after if episode == 0 else 0
            if opened[i] != 0:
                peaks[found] = s
                found += 1
            elif after > 0:
                peaks[found - 1] = max(peaks[found - 1], s)
            elif after < 0:
                peaks[found - 1] = min(peaks[found - 1], s)
            episode = after
        return found

    return compiled(loop)


@cache
def _count_loop() -> Callable[..., Any]:
    law = compiled(judge)

    def loop(path: Floats, low: float, high: float, centre: float, rearm: float) -> int:
        found = 0
        episode = 0
        for s in path:
            after = law(episode, s, low, high, centre, rearm)
            if episode == 0 and after != 0:
                found += 1
            episode = after
        return found

    return compiled(loop)


@cache
def _before_loop() -> Callable[..., Any]:
    law = compiled(judge)

    def loop(path: Floats, limits: tuple[float, float, float, float], at: Integers, out: Integers) -> None:
        low, high, centre, rearm = limits
        episode = 0
        i = 0
        for j in range(len(at)):
            while i < at[j]:
                episode = law(episode, path[i], low, high, centre, rearm)
                i += 1
            out[j] = episode

    return compiled(loop)


@dataclass(frozen=True, slots=True)
class Episodes:
    """Alarms on a path of the statistic, one element each: index at which it opened, side (+1, -1) and furthest value."""

    at: Integers
    side: Sides
    peak: Floats

    def __len__(self) -> int:
        return len(self.at)


def episodes(path: Floats, limits: Limits) -> Episodes:
    """Every episode on a path of the statistic.

    Parameters
    ----------
    path : (n,)
        The statistic; not a number where not judged (or where the result was dropped).
    limits
        Control limits and re-arm share; an infinite limit is never crossed.
    """
    opened = np.empty(len(path), dtype=np.int8)
    peaks = np.empty(len(path))
    found = _alarms_loop()(path, *limits, opened, peaks)
    at = np.flatnonzero(opened)
    return Episodes(at, opened[at], peaks[:found].copy())


def count_episodes(path: Floats, limits: Limits) -> int:
    """Number of episodes on a path of the statistic, shape (n,)."""
    return int(_count_loop()(path, *limits))


def episodes_before(path: Floats, limits: Limits, at: Integers) -> Integers:
    """Episode open before each index of `at` (not decreasing) on a path (n,): 0 armed, +1 above, -1 below; shape (r,)."""
    out = np.empty(len(at), dtype=np.int64)
    _before_loop()(path, limits, at, out)
    return out
