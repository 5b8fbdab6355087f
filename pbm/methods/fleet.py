"""A laboratory's alarm budget shared among its streams, where each further alarm saves most.

For each stream the expected unreliable results of an error fall as its budget of false alarms grows: its trade-off curve. The total of all
streams is least where the marginal gain, the fall per further alarm, is equal on all of them. On the lower convex hull of each curve the
gain falls from segment to segment, so that taking the segment of largest gain, again and again until the budget is spent, is optimal.

Source: "Generalized Lagrange multiplier method for solving problems of optimum allocation of resources", Operations Research
1963;11:399-417.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Floats, Integers


@dataclass(frozen=True, slots=True)
class TradeOff:
    """What budgets buy on one stream.

    Attributes
    ----------
    budget : (b,)
        False alarms a day, rising.
    cost : (b,)
        Expected unreliable results of an error at each.
    """

    budget: Floats
    cost: Floats


@dataclass(frozen=True, slots=True)
class Share:
    """What a stream got.

    Attributes
    ----------
    budget
        False alarms a day.
    gain
        Fall of its expected unreliable results for one further alarm a day; 0 where no more is to be had.
    """

    budget: float
    gain: float


def shared(curves: Sequence[TradeOff], total: float) -> list[Share]:
    """Share a total budget (false alarms a day) among streams.

    Every stream gets at least the smallest budget of its curve; where the total does not reach that far, all get the same part of it.

    Raises
    ------
    ValueError
        If the total is not above 0.
    """
    if total <= 0:
        raise ValueError(f"a budget to share is above 0, not {total}")
    hulls = [_lower_hull(curve) for curve in curves]
    least = np.array([curve.budget[0] for curve in curves])
    if least.sum() >= total:
        return [Share(float(b), _gain(h, 0)) for b, h in zip(least * total / least.sum(), hulls, strict=True)]
    at = [0] * len(curves)
    budget, left = least.copy(), total - least.sum()
    while left > 0:
        best = max(range(len(curves)), key=lambda i: _gain(hulls[i], at[i]))
        if _gain(hulls[best], at[best]) <= 0:
            break
        step = min(hulls[best].budget[at[best] + 1] - budget[best], left)
        budget[best] += step
        left -= step
        if budget[best] >= hulls[best].budget[at[best] + 1]:
            at[best] += 1
    return [Share(float(b), _gain(h, i)) for b, h, i in zip(budget, hulls, at, strict=True)]


def _gain(hull: TradeOff, segment: int) -> float:
    if segment + 1 >= len(hull.budget):
        return 0.0
    fall = hull.cost[segment] - hull.cost[segment + 1]
    return float(fall / (hull.budget[segment + 1] - hull.budget[segment]))


def _lower_hull(curve: TradeOff) -> TradeOff:
    """The points of the lower convex hull; costs that simulation made rise are passed over."""
    kept: list[int] = []
    for i in range(len(curve.budget)):
        while len(kept) > 1 and _turns_up(curve, kept[-2], kept[-1], i):
            kept.pop()
        kept.append(i)
    chosen: Integers = np.array(kept, dtype=np.int64)
    return TradeOff(curve.budget[chosen], curve.cost[chosen])


def _turns_up(curve: TradeOff, a: int, b: int, c: int) -> bool:
    """Whether b lies on or above the line from a to c."""
    rise = (curve.cost[c] - curve.cost[a]) / (curve.budget[c] - curve.budget[a])
    return bool(curve.cost[b] >= curve.cost[a] + rise * (curve.budget[b] - curve.budget[a]))
