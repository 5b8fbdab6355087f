"""The in-control level learned again after it may have moved, such as with a new reagent lot: how far the centre follows the results.

Of n admitted values since the event the mean lies d from the level of the plan. Before them the level is believed to lie at b (where it was
before the event), give or take t; the mean tells it with the variance v = spread^2 inflation / n + wander^2. The centre is put at

    b + t^2 / (t^2 + v) (d - b),   at most as far from the level of the plan as the cap allows on each side

with t a quarter of the distance between the caps, so that it moves little while results are few, and never beyond the cap: a larger
change shows as an alarm.

Source of the shrinkage: "Data analysis using Stein's estimator and its generalizations", Journal of the American Statistical Association
1975;70:311-319.
"""

from pbm.methods.onset import InControl


def recentred(total: float, count: int, before: float, in_control: InControl, low: float, high: float) -> float:
    """How far the centre lies from the level of the plan, on the statistic's scale.

    Parameters
    ----------
    total, count
        Sum of the deviations of the admitted values since the event from the level of the plan, and their number (1 or more).
    before
        How far the centre lay from the level of the plan before the event.
    in_control
        Behaviour of admitted values; its centre is not used.
    low, high
        The caps, not positive and not negative.

    Examples
    --------
    >>> usual = InControl(140.0, 2.0)
    >>> [round(recentred(0.6 * n, n, 0.0, usual, -1.0, 1.0), 2) for n in (1, 10, 100, 1000)]
    [0.04, 0.23, 0.52, 0.59]
    >>> recentred(300.0, 100, 0.0, usual, -1.0, 1.0)
    1.0
    """
    variance = in_control.spread**2 * in_control.inflation / count + in_control.wander**2
    belief = ((high - low) / 4) ** 2
    moved = before + belief / (belief + variance) * (total / count - before)
    return min(max(moved, low), high)
