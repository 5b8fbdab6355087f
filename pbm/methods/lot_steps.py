"""How the level of results moved from reagent lot to reagent lot, with an interval by the bootstrap over days.

    step_l = mean of lot l - mean of lot l-1,   lots in order of first use

Results of one day share its patients, so the days of each lot are drawn again as wholes, each lot by itself. What patients and seasons
moved in the meantime is in the step too.

Source: "Bootstrap methods: another look at the jackknife", Annals of Statistics 1979;7:1-26.
"""

from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Floats, Integers

DRAWS = 1_000
FEWEST_DAYS = 2


@dataclass(frozen=True, slots=True)
class LotStep:
    """One lot.

    Attributes
    ----------
    code
        Which.
    at
        Places of its results.
    step, interval
        From the lot before, and its 90 % interval; none for the first, and no interval where either has less than two days.
    """

    code: int
    at: Integers
    step: float | None
    interval: tuple[float, float] | None


def lot_steps(x: Floats, lot: Integers, day: Integers, random: np.random.Generator) -> list[LotStep]:
    """Every lot in order of first use.

    Parameters
    ----------
    x : (n,)
        Results in order of time.
    lot : (n,)
        Lot of each, below 0 where not known.
    day : (n,)
        Local day of each.
    random
        Generator; the caller owns the seed.
    """
    codes, first = np.unique(lot[lot >= 0], return_index=True)
    found: list[LotStep] = []
    means: list[tuple[float, Floats]] = []
    for code in codes[np.argsort(first)].tolist():
        at = np.flatnonzero(lot == code)
        means.append((float(x[at].mean()), _drawn_means(x[at], day[at], random)))
        found.append(_step(code, at, means))
    return found


def _step(code: int, at: Integers, means: list[tuple[float, Floats]]) -> LotStep:
    if len(means) == 1:
        return LotStep(code, at, None, None)
    (before, drawn_before), (mean, drawn) = means[-2:]
    if not (len(drawn_before) and len(drawn)):
        return LotStep(code, at, mean - before, None)
    low, high = np.quantile(drawn - drawn_before, (0.05, 0.95))
    return LotStep(code, at, mean - before, (float(low), float(high)))


def _drawn_means(x: Floats, day: Integers, random: np.random.Generator) -> Floats:
    """The mean of a lot in each draw of its days; none where it has less than two."""
    _, place = np.unique(day, return_inverse=True)
    sums, counts = np.bincount(place, weights=x), np.bincount(place)
    if len(counts) < FEWEST_DAYS:
        return np.zeros(0)
    drawn = random.integers(0, len(counts), (DRAWS, len(counts)))
    means: Floats = sums[drawn].sum(axis=1) / counts[drawn].sum(axis=1)
    return means
