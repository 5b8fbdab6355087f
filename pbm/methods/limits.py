"""Control limits that keep to an alarm budget.

On each side of the centre the episodes of the in-control path above a tail threshold u are counted (m of them) and the mean excess of
their furthest values, beta, is taken. The rate of episodes beyond a limit l > u is then, per history of the same length,

    rate(l) = m exp(-(l - u) / beta)                                   (exponential tail)

A limit learned from few episodes is itself uncertain, and since the rate is convex in the limit, the limit at face value alarms too often
later. With m exponential excesses the predicted rate, over the uncertainty of beta, is m (1 + (l - u) / (m beta))^-m, so that

    l = u + m beta ((m / expected)^(1/m) - 1)                          (predictive limit)

The day-block bootstrap replaces that closed form by histories made of resampled whole days, with the state carried across days: the
limit is the one whose rate, averaged over those histories, is the budget, and the spread of their own limits is its 90 % interval.

Source of the tail: "Statistical inference using extreme order statistics", Annals of Statistics 1975;3:119-131. Source of the bootstrap:
"The jackknife and the bootstrap for general stationary observations", Annals of Statistics 1989;17:1217-1241.
"""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.alarm import Episodes, Limits, episodes
from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats, Integers

REARM = 0.5
TAIL_EPISODES = 30
TAIL_SEARCH = 12


@dataclass(frozen=True, slots=True)
class Tail:
    """Episodes beyond a threshold on one side, as distances from the centre.

    Attributes
    ----------
    threshold
        u, as a distance from the centre.
    count
        m, episodes beyond u in the history.
    excess
        beta, mean distance of their furthest values beyond u.
    """

    threshold: float
    count: int
    excess: float

    def limit(self, expected: float) -> float:
        """Predictive limit, as a distance from the centre, for an expected number of episodes in a history of this length."""
        if self.count <= expected:
            return self.threshold
        growth = math.pow(self.count / expected, 1 / self.count) - 1
        return self.threshold + self.count * self.excess * growth

    def rate(self, distance: float) -> float:
        """Episodes beyond a distance, at face value."""
        return self.count * math.exp(-(distance - self.threshold) / self.excess)

    def face_value_limit(self, expected: float) -> float:
        """The distance at which `rate` is the expected number, at least the threshold."""
        return self.threshold + self.excess * math.log(max(self.count / expected, 1.0))


def side_episodes(path: Floats, centre: float, side: int, distance: float) -> Episodes:
    """Episodes on one side (+1, -1) beyond a distance from the centre; furthest values are given as distances."""
    upward = side * (path - centre)
    return episodes(upward, Limits(-math.inf, distance, 0.0, REARM))


def tail_of(path: Floats, centre: float, side: int, expected: float) -> Tail | None:
    """The tail of a path (n,) on one side, or None if the path never leaves the centre often enough to tell."""
    upward = side * (path - centre)
    judged = upward[~np.isnan(upward)]
    if len(judged) < TAIL_EPISODES or (top := float(judged.max())) <= 0:
        return None
    wanted = max(TAIL_EPISODES, math.ceil(2 * expected))
    inner, outer = max(float(np.quantile(judged, 0.75)), 0.01 * top), top
    for _ in range(TAIL_SEARCH):
        middle = (inner + outer) / 2
        enough = len(episodes(upward, Limits(-math.inf, middle, 0.0, REARM))) >= wanted
        inner, outer = (middle, outer) if enough else (inner, middle)
    found = episodes(upward, Limits(-math.inf, inner, 0.0, REARM))
    excess = float((found.peak - inner).mean()) if len(found) else 0.0
    return Tail(inner, len(found), excess) if excess > 0 else None


def quick_limits(path: Floats, centre: float, expected: float) -> Limits | None:
    """Predictive limits for an expected number of episodes in a history of this length, split evenly between the sides.

    Parameters
    ----------
    path : (n,)
        In-control path of the statistic.
    centre
        Its centre.
    expected
        Episodes on both sides together.

    Returns
    -------
    Limits or None
        None if a side has no tail to learn from.
    """
    below, above = (tail_of(path, centre, side, expected / 2) for side in (-1, 1))
    if below is None or above is None:
        return None
    return Limits(centre - below.limit(expected / 2), centre + above.limit(expected / 2), centre, REARM)


@dataclass(frozen=True, slots=True)
class CalibratedLimits:
    """Limits with the 90 % intervals of the day-block bootstrap, each (low, high)."""

    limits: Limits
    low_interval: tuple[float, float]
    high_interval: tuple[float, float]


def _resampled_days(z: Floats, first: Integers, random: np.random.Generator) -> Floats:
    """As many whole days as there are, drawn with replacement; day d is z[first[d]:first[d + 1]]."""
    drawn = random.integers(0, len(first) - 1, len(first) - 1)
    return np.concatenate([z[first[d] : first[d + 1]] for d in drawn])


def _predictive(tails: list[Tail], expected: float) -> float:
    """The distance whose rate, averaged over the tails, is the expected number."""
    inner = tails[0].threshold  # the same for all; the tail says nothing of distances inside it
    outer = inner + max(t.face_value_limit(expected) - inner + t.excess for t in tails)
    for _ in range(60):
        middle = (inner + outer) / 2
        too_many = sum(t.rate(middle) for t in tails) / len(tails) > expected
        inner, outer = (middle, outer) if too_many else (inner, middle)
    return outer


def _tail_beyond(path: Floats, centre: float, side: int, threshold: float) -> Tail | None:
    found = side_episodes(path, centre, side, threshold)
    excess = float((found.peak - threshold).mean()) if len(found) else 0.0
    return Tail(threshold, len(found), excess) if excess > 0 else None


def _between_values(path: Floats, limit: float) -> float:
    """The limit moved half-way between the two neighbouring values of the path, so that rounding of results decides nothing."""
    below = path[path <= limit]
    above = path[path > limit]
    return (float(below.max()) + float(above.min())) / 2 if len(below) and len(above) else limit


def calibrated_limits(
    tracker: Tracker, z: Floats, day_starts: Integers, expected: float, random: np.random.Generator, draws: int = 200
) -> CalibratedLimits | None:
    """Limits for an alarm budget, by the day-block bootstrap.

    Parameters
    ----------
    tracker
        The statistic, centred.
    z : (n,)
        Prepared in-control values of the training days.
    day_starts : (d + 1,)
        Index of the first value of each day, and n.
    expected
        Episodes that the budget allows in these days, both sides together.
    random
        Generator; the caller owns the seed.
    draws
        Pseudo-histories.

    Returns
    -------
    CalibratedLimits or None
        None if a side has no tail to learn from.
    """
    path = tracker.path(z)
    centre = tracker.centre
    fitted = {side: tail_of(path, centre, side, expected / 2) for side in (-1, 1)}
    if None in fitted.values():
        return None
    drawn: dict[int, list[Tail]] = {-1: [], 1: []}
    for _ in range(draws):
        pseudo = tracker.path(_resampled_days(z, day_starts, random))
        for side, tail in fitted.items():
            assert tail is not None
            if (again := _tail_beyond(pseudo, centre, side, tail.threshold)) is not None:
                drawn[side].append(again)
    ends: dict[int, float] = {}
    intervals: dict[int, tuple[float, float]] = {}
    for side, tails in drawn.items():
        ends[side] = _between_values(path, centre + side * _predictive(tails, expected / 2))
        quantiles = np.quantile([centre + side * t.face_value_limit(expected / 2) for t in tails], [0.05, 0.95])
        intervals[side] = (float(quantiles[0]), float(quantiles[1]))
    return CalibratedLimits(Limits(ends[-1], ends[1], centre, REARM), intervals[-1], intervals[1])
