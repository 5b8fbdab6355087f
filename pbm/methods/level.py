"""How far the level of an analyser lies, over some days, from that of other days: calibrations and lots of reagent move it.

Days drawn at random tell how much they differ among themselves, but not how far all of them together, made with one or two lots, lie from
days made with others. So the history is cut into k blocks of ten days. If the daily means of a block vary by s^2 within it, its own mean
would vary by w = s^2 / 10 if its days were drawn at random; the means of the blocks vary by B. The level's wandering u, which no draw of
days shows, makes B about u^2 + w. From few blocks u is uncertain, and "none seen" is not "none there": taken is

    mean of u^2 over  L(u) ~ (u^2 + w)^(-(k-1)/2) exp(-(k-1) B / (2 (u^2 + w))),   every u >= 0 as likely beforehand

Source of random groups: "The Analysis of Variance", Wiley 1959, chapter 7 (from memory); the mean over L is the project's own choice.
"""

import math

import numpy as np

from pbm.methods.jit import Floats, Integers

BLOCK = 10  # days
FEWEST_BLOCKS, FEWEST_DAYS = 3, 4
GRID, FARTHEST = 2_000, 6.0


def level_wandering(z: Floats, days: Integers) -> float:
    """u of values on their local days; 0 where there are fewer than three blocks of days.

    Parameters
    ----------
    z : (n,)
        Prepared values in control; not a number where dropped.
    days : (n,)
        Local day of each, not decreasing.
    """
    told = ~np.isnan(z)
    labels, place = np.unique(days[told], return_inverse=True)
    if len(labels) == 0:
        return 0.0
    means = np.bincount(place, weights=z[told]) / np.bincount(place)
    block = (labels - labels[0]) // BLOCK
    groups = [group for one in np.unique(block) if len(group := means[block == one]) >= FEWEST_DAYS]
    if len(groups) < FEWEST_BLOCKS:
        return 0.0
    between = float(np.var([group.mean() for group in groups], ddof=1))
    within = float(np.mean([group.var(ddof=1) / len(group) for group in groups]))
    return _expected(between, within, len(groups))


def _expected(between: float, within: float, blocks: int) -> float:
    """Root of the mean of u^2 over its likelihood."""
    if between <= 0 or within <= 0:
        return 0.0
    u = np.linspace(0, FARTHEST * math.sqrt(max(between, within)), GRID)
    variance = u**2 + within
    logarithm = -(blocks - 1) / 2 * (np.log(variance) + between / variance)
    likelihood = np.exp(logarithm - logarithm.max())
    return math.sqrt(float((u**2 * likelihood).sum() / likelihood.sum()))
