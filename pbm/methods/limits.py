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

from pbm.methods.alarm import REARM, Limits, count_episodes, episodes
from pbm.methods.chain import Tracker
from pbm.methods.intervals import poisson_mixture_interval
from pbm.methods.jit import Floats, Integers
from pbm.methods.lattice import lattice_of

TAIL_EPISODES = 30
TAIL_SEARCH = 9
ROUNDING = 1e-9  # of the centre: a path that stays so near to it shows rounding errors and no tail


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


def tail_of(path: Floats, centre: float, side: int, expected: float) -> Tail | None:
    """The tail of a path (n,) on one side, or None if the path never leaves the centre often enough to tell."""
    outward = side * (path - centre)
    judged = outward[~np.isnan(outward)]
    if len(judged) < TAIL_EPISODES or (top := float(judged.max())) <= ROUNDING * abs(centre):
        return None
    wanted = max(TAIL_EPISODES, math.ceil(2 * expected))
    inner, outer = max(float(np.quantile(judged, 0.75)), 0.01 * top), top
    for _ in range(TAIL_SEARCH):
        middle = (inner + outer) / 2
        enough = count_episodes(outward, Limits(-math.inf, middle, 0.0, REARM)) >= wanted
        inner, outer = (middle, outer) if enough else (inner, middle)
    return _tail_beyond(outward, lattice_of(judged).gap_within(inner))


def _tail_beyond(outward: Floats, threshold: float) -> Tail | None:
    found = episodes(outward, Limits(-math.inf, threshold, 0.0, REARM))
    excess = float((found.peak - threshold).mean()) if len(found) else 0.0
    return Tail(threshold, len(found), excess) if excess > 0 else None


def _shares(upper: float) -> dict[int, float]:
    """Share of the budget on each side that has a limit."""
    if not 0 <= upper <= 1:
        raise ValueError(f"the upper side's share of the budget lies between 0 and 1, not at {upper}")
    return {side: share for side, share in ((-1, 1 - upper), (1, upper)) if share > 0}


def quick_limits(path: Floats, centre: float, expected: float, upper: float = 0.5) -> Limits | None:
    """Predictive limits for an expected number of episodes in a history of this length.

    Parameters
    ----------
    path : (n,)
        In-control path of the statistic.
    centre
        Its centre.
    expected
        Episodes on both sides together.
    upper
        Share of them above the upper limit; with 1 there is no lower limit (it is infinite), with 0 no upper one.

    Returns
    -------
    Limits or None
        None if a side has no tail to learn from.
    """
    ends = {-1: -math.inf, 1: math.inf}
    for side, share in _shares(upper).items():
        if (tail := tail_of(path, centre, side, share * expected)) is None:
            return None
        outward = side * (path - centre)
        ends[side] = centre + side * lattice_of(outward[~np.isnan(outward)]).gap_beyond(tail.limit(share * expected))
    return Limits(ends[-1], ends[1], centre, REARM)


@dataclass(frozen=True, slots=True)
class CalibratedLimits:
    """Limits for a budget.

    Attributes
    ----------
    limits
        Predictive limits.
    low_interval, high_interval
        90 % interval (low, high) of each from the day-block bootstrap; None for a side without a limit.
    episodes
        Episodes of the training path at these limits. A statistic on a lattice may stay well below what the budget allows, since its
        limits can only lie between lattice points.
    rates
        Episodes at these limits in a history of the same length, as each pseudo-history would have it.
    """

    limits: Limits
    low_interval: tuple[float, float] | None
    high_interval: tuple[float, float] | None
    episodes: int
    rates: tuple[float, ...]

    def predicted(self, length: float) -> tuple[int, int]:
        """90 % interval of the episodes in later days, as many as `length` times the training days; the limit's uncertainty included."""
        return poisson_mixture_interval([rate * length for rate in self.rates])


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


def calibrated_limits(
    tracker: Tracker,
    z: Floats,
    day_starts: Integers,
    expected: float,
    random: np.random.Generator,
    draws: int = 200,
    upper: float = 0.5,
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
    upper
        Share of the episodes above the upper limit; with 1 there is no lower limit, with 0 no upper one.

    Returns
    -------
    CalibratedLimits or None
        None if a side has no tail to learn from.
    """
    path, centre = tracker.path(z), tracker.centre
    allowed = {side: share * expected for side, share in _shares(upper).items()}
    tails = {side: tail for side, count in allowed.items() if (tail := tail_of(path, centre, side, count)) is not None}
    if len(tails) < len(allowed):
        return None
    drawn: dict[int, list[Tail | None]] = {side: [] for side in tails}
    for _ in range(draws):
        pseudo = tracker.path(_resampled_days(z, day_starts, random))
        for side, tail in tails.items():
            drawn[side].append(_tail_beyond(side * (pseudo - centre), tail.threshold))
    told = {side: [tail for tail in again if tail is not None] for side, again in drawn.items()}
    if not all(told.values()):
        return None
    ends = {side: _side_limit(path, centre, side, found, allowed[side]) for side, found in told.items()}
    intervals = {side: _side_interval(centre, side, found, allowed[side]) for side, found in told.items()}
    limits = tracker.admissible(Limits(ends.get(-1, -math.inf), ends.get(1, math.inf), centre, REARM))
    episodes_now = count_episodes(path, limits)
    return CalibratedLimits(limits, intervals.get(-1), intervals.get(1), episodes_now, _rates(drawn, limits))


def _rates(drawn: dict[int, list[Tail | None]], limits: Limits) -> tuple[float, ...]:
    """Episodes of each pseudo-history beyond the limits, both sides together; a side that shows no tail has none."""
    distance = {-1: limits.centre - limits.low, 1: limits.high - limits.centre}
    sides = [[tail.rate(distance[side]) if tail else 0.0 for tail in again] for side, again in drawn.items()]
    return tuple(map(sum, zip(*sides, strict=True)))


def _side_limit(path: Floats, centre: float, side: int, tails: list[Tail], expected: float) -> float:
    outward = side * (path - centre)
    return centre + side * lattice_of(outward[~np.isnan(outward)]).gap_beyond(_predictive(tails, expected))


def _side_interval(centre: float, side: int, tails: list[Tail], expected: float) -> tuple[float, float]:
    low, high = np.quantile([centre + side * tail.face_value_limit(expected) for tail in tails], [0.05, 0.95])
    return float(low), float(high)
