"""The first round of the search as a competent person writes it with pandas and numpy: results at once, onsets and candidates in loops.

The same law as pbm/methods/{limits,search}.py in other words: predictive limits from the tail of episodes on each side, a fault tried at
each onset from the monitor's standing there, expected unreliable results until its alarm.
"""

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
import pandas as pd

from pbm.methods.candidates import Candidate
from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers
from pbm.methods.trials import Stretch, Trial

MEMORY = 2_000  # values before an onset from which an EWMA or CUSUM is brought to where it stands


def path_of(candidate: Candidate, z: Floats, level: float, spread: float) -> Floats:
    """The statistic after each value, from a fresh start."""
    n = int(candidate.parameter) if candidate.parameter > 1 else 0
    if candidate.statistic == "mean":
        return np.asarray(pd.Series(z).rolling(n).mean())
    if candidate.statistic == "median":
        return np.asarray(pd.Series(z).rolling(n).median())
    if candidate.statistic == "ewma":
        begun = pd.Series(np.concatenate([[level], z]))
        return np.asarray(begun.ewm(alpha=candidate.parameter, adjust=False).mean())[1:]
    u = (z - level) / spread
    up, down = (np.cumsum(sign * u - candidate.parameter) for sign in (1, -1))
    above = up - np.minimum.accumulate(np.minimum(up, 0.0))
    below = down - np.minimum.accumulate(np.minimum(down, 0.0))
    return np.where(above >= below, above, -below)


def opened(path: Floats, low: float, high: float, centre: float, begun: int = 0) -> Integers:
    """Places at which an episode opens, `begun` being open before."""
    inside = (path >= centre + 0.5 * (low - centre)) & (path <= centre + 0.5 * (high - centre))
    side = np.where(path > high, 1, np.where(path < low, -1, 0))
    told = np.concatenate([[2 if begun else 3], np.where(side != 0, 1, np.where(inside, 3, 0))])
    last = told[np.maximum.accumulate(np.where(told > 0, np.arange(len(told)), 0))]
    is_open = last < 3
    return np.flatnonzero(is_open[1:] & ~is_open[:-1])


def tail_limit(path: Floats, centre: float, side: int, expected: float) -> float:
    """The predictive limit on one side, as a distance from the centre."""
    outward = side * (path - centre)
    judged = outward[~np.isnan(outward)]
    top = float(judged.max())
    wanted = max(30, math.ceil(2 * expected))
    inner, outer = max(float(np.quantile(judged, 0.75)), 0.01 * top), top
    for _ in range(9):
        middle = (inner + outer) / 2
        enough = len(opened(outward, -np.inf, middle, 0.0)) >= wanted
        inner, outer = (middle, outer) if enough else (inner, middle)
    at = opened(outward, -np.inf, inner, 0.0)
    peaks = np.maximum.reduceat(np.nan_to_num(outward, nan=-np.inf), at)
    m, beta = len(at), float((peaks - inner).mean())
    return inner + m * beta * ((m / expected) ** (1 / m) - 1)


def naive_scores(
    stretch: Stretch,
    given: Sequence[Candidate],
    expected: float,
    trials: Sequence[tuple[Trial, float]],
    stop: Any,
) -> Floats:
    """Expected unreliable results of each candidate at each onset, averaged over the faults, (c, r); all results are admitted."""
    z = stretch.value
    level, spread = float(z.mean()), float(z.std())
    onsets: Onsets = trials[0][0].onsets
    scores = np.zeros((len(given), len(onsets.at)))
    for row, candidate in enumerate(given):
        path = path_of(candidate, z, level, spread)
        centre = {"ewma": level, "cusum": 0.0}.get(candidate.statistic, float(np.nanmean(path)))
        low, high = (centre + side * tail_limit(path, centre, side, expected / 2) for side in (-1, 1))
        alarms = opened(path, low, high, centre)
        for tried, weight in trials:
            found = np.array(
                [
                    _results_to_alarm(candidate, z, path, alarms, tried, onset, (low, high, centre), level, spread)
                    for onset in range(len(onsets.at))
                ]
            )
            scores[row] += weight * tried.exposure.unreliable(stop(found, onsets)[1])
    return scores / sum(weight for _, weight in trials)


def _results_to_alarm(
    candidate: Candidate,
    z: Floats,
    path: Floats,
    alarms: Integers,
    tried: Trial,
    onset: int,
    limits: tuple[float, float, float],
    level: float,
    spread: float,
) -> int:
    at, end = int(tried.onsets.at[onset]), int(tried.onsets.end[onset])
    first = max(0, at - MEMORY)
    seen = path_of(candidate, np.concatenate([z[first:at], tried.values[at:end]]), level, spread)[at - first :]
    low, high, centre = limits
    inside = (path[:at] >= centre + 0.5 * (low - centre)) & (path[:at] <= centre + 0.5 * (high - centre))
    last_inside = np.flatnonzero(inside[-5_000:])
    last_alarm = alarms[alarms < at]
    armed_at = max(0, at - 5_000) + int(last_inside[-1]) if len(last_inside) else -1
    begun = int(len(last_alarm) > 0 and last_alarm[-1] > armed_at)
    found = opened(seen, low, high, centre, begun)
    return int(found[0]) + 1 if len(found) else 0
