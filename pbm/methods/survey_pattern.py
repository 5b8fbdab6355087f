"""Daily and weekly pattern: means by group (hour, weekday, hour of the week, ward), and the share of the variance that the groups explain.

    share = (SS between - (g - 1) MS within) / (SS total + MS within)        (omega squared; 0 where chance alone would give more)

Source: analysis of variance with one factor in its textbook form (from memory).
"""

import numpy as np

from pbm.methods.jit import Floats, Integers


def group_means(y: Floats, group: Integers, groups: int) -> Floats:
    """Mean of the values y (n,) in each of the groups 0 ... groups - 1; not a number where there is none."""
    count = np.bincount(group, minlength=groups)
    total = np.bincount(group, weights=y, minlength=groups)
    means: Floats = np.where(count > 0, total / np.maximum(count, 1), np.nan)
    return means


def share_of_variance(y: Floats, group: Integers) -> float:
    """Share of the variance of y (n,) that the groups explain, less what chance alone gives them; between 0 and 1.

    Examples
    --------
    >>> share_of_variance(np.array([1.0, 1, 2, 2]), np.array([0, 0, 1, 1]))
    1.0
    >>> share_of_variance(np.array([1.0, 2, 1, 2]), np.array([0, 0, 1, 1]))
    0.0
    """
    _, code = np.unique(group, return_inverse=True)
    groups = int(code.max()) + 1
    total = float(((y - y.mean()) ** 2).sum())
    if groups < 2 or len(y) <= groups or total == 0:
        return 0.0
    within = float(((y - group_means(y, code, groups)[code]) ** 2).sum())
    mean_within = within / (len(y) - groups)
    share = (total - within - (groups - 1) * mean_within) / (total + mean_within)
    return min(max(share, 0.0), 1.0)
