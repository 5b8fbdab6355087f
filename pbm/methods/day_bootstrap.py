"""Bootstrap over days: whole days are drawn with replacement, since onsets of one day share its patients.

Working days and weekend days are drawn each among themselves (a week always has both), with replacement. As many draws as days would give
intervals that are too narrow where days are few: of D days in S strata the share

    (D - S) / D * (z / t)^2,   z and t the 95th percentiles of the normal distribution and of Student's with D - S degrees of freedom

is drawn instead, so that the spread of a mean over the draws is that which a t interval would take. The mean of a figure over onsets is, in
draw b with day d taken c_bd times, sum_d c_bd x_d / sum_d c_bd n_d, with x_d the sum of the figure over the n_d onsets of day d: all draws
at once are one product of the day counts with the day sums. Intervals are percentile intervals.

Sources: "Bootstrap methods: another look at the jackknife", Annals of Statistics 1979;7:1-26; fewer draws than observations:
"Resampling inference with complex survey data", Journal of the American Statistical Association 1988;83:231-241.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.stats import norm
from scipy.stats import t as student

from pbm.methods.detection import Detection
from pbm.methods.jit import Floats, Integers

Mask = npt.NDArray[np.bool_]
LEVEL = 0.9
GRID = 128  # places at which the distribution of results until detection is drawn
NEGLIGIBLE = 1e-15  # chances far below it are denormal numbers, which are slow
TIE = 1e-9  # shares that differ by less are the same but for rounding
_THURSDAY, _WEEK, _SATURDAY = 3, 7, 5  # 1970-01-01 was a Thursday; Monday is 0


def on_weekend(days: Integers) -> Mask:
    """Whether local days since 1970-01-01 are Saturdays or Sundays, shape (n,)."""
    weekend: Mask = (days + _THURSDAY) % _WEEK >= _SATURDAY
    return weekend


def _share_drawn(days: int, strata: int) -> float:
    """Draws for each day."""
    free = days - strata
    if free < 1:
        return 1.0
    return free / days * float(norm.ppf((1 + LEVEL) / 2) / student.ppf((1 + LEVEL) / 2, free)) ** 2


def ends(drawn: Floats, value: float) -> tuple[float, float]:
    """Percentile interval of the draws (b,), widened to its figure where that lies outside; what a draw could not tell is left out."""
    told = np.sort(drawn[~np.isnan(drawn)])
    if len(told) == 0:
        return value, value
    low, high = (_between(told, share) for share in ((1 - LEVEL) / 2, (1 + LEVEL) / 2))
    return min(low, value), max(high, value)


def _between(ordered: Floats, share: float) -> float:
    place = share * (len(ordered) - 1)
    below = int(place)
    above = min(below + 1, len(ordered) - 1)
    return float(ordered[below] + (place - below) * (ordered[above] - ordered[below]))


@dataclass(frozen=True, slots=True)
class Estimate:
    """A figure and what each draw of the bootstrap makes of it, shape (b,); not a number where a draw has nothing to tell."""

    value: float
    drawn: Floats

    @property
    def interval(self) -> tuple[float, float]:
        """90 % interval, which holds the figure."""
        return ends(self.drawn, self.value)

    def __sub__(self, other: "Estimate") -> "Estimate":
        """The difference, draw by draw."""
        return Estimate(self.value - other.value, self.drawn - other.drawn)

    def swayed(self, by: float, normal: Floats, lowest: float, highest: float) -> "Estimate":
        """With what one unit of something that draws of days do not show would change, times a normal deviate in each draw (b,)."""
        return Estimate(self.value, np.clip(self.drawn + by * normal, lowest, highest))

    def times(self, factor: float) -> "Estimate":
        """A multiple."""
        return Estimate(factor * self.value, factor * self.drawn)

    def share_of(self, whole: "Estimate") -> "Estimate":
        """This as a share of a whole; 0 where the whole is 0."""
        drawn = np.where(whole.drawn > 0, self.drawn / np.where(whole.drawn > 0, whole.drawn, 1.0), 0.0)
        return Estimate(self.value / whole.value if whole.value > 0 else 0.0, drawn)


def average(estimates: Sequence[Estimate], weights: Sequence[float]) -> Estimate:
    """Weighted average, draw by draw."""
    total = sum(weights)
    pairs = list(zip(estimates, weights, strict=True))
    drawn = np.sum([weight * one.drawn for one, weight in pairs], axis=0) / total
    return Estimate(sum(weight * one.value for one, weight in pairs) / total, drawn)


def largest(estimates: Sequence[Estimate]) -> tuple[Estimate, int, float]:
    """The largest of several figures: in each draw the largest of that draw; which it is, and the share of draws that agree."""
    drawn = np.array([one.drawn for one in estimates])
    place = max(range(len(estimates)), key=lambda i: estimates[i].value)
    agreed = float((drawn.argmax(axis=0) == place).mean())
    return Estimate(estimates[place].value, drawn.max(axis=0)), place, agreed


@dataclass(frozen=True, slots=True)
class DayBootstrap:
    """Draws of days, and the day of each observation.

    Attributes
    ----------
    taken : (b, d)
        How often each draw takes each day.
    day : (r,)
        Place of each observation's day among the d days.
    """

    taken: Floats
    day: Integers

    @classmethod
    def of(cls, days: Integers, draws: int, random: np.random.Generator) -> "DayBootstrap":
        """Draw for observations on these local days (r,), counted from 1970-01-01."""
        labels, day = np.unique(days, return_inverse=True)
        taken = np.zeros((draws, len(labels)))
        weekend = on_weekend(labels)
        strata = [stratum for stratum in (np.flatnonzero(~weekend), np.flatnonzero(weekend)) if len(stratum)]
        share = _share_drawn(len(labels), len(strata))
        for stratum in strata:
            count = max(round(share * len(stratum)), 1)
            taken[:, stratum] = random.multinomial(count, np.full(len(stratum), 1 / len(stratum)), size=draws)
        return cls(taken, day.astype(np.int64))

    def mean(self, each: Floats, within: Mask | None = None) -> Estimate:
        """Mean of a figure known at each observation (r,), of all or of some of them."""
        counted = np.ones(len(self.day)) if within is None else within.astype(np.float64)
        return self.ratio(each * counted, counted)

    def ratio(self, part: Floats, whole: Floats) -> Estimate:
        """Sum of one amount over the sum of another, both known at each observation (r,); the second is not 0 throughout."""
        parts, wholes = self._drawn(part), self._drawn(whole)
        drawn = np.where(wholes > 0, parts / np.where(wholes > 0, wholes, 1.0), np.nan)
        return Estimate(float(part.sum() / whole.sum()), drawn)

    def _drawn(self, each: Floats) -> Floats:
        """Sum over the days that each draw takes, shape (b,); without BLAS, whose threads wait for each other on a busy machine."""
        by_day = np.bincount(self.day, weights=each, minlength=self.taken.shape[1])
        drawn: Floats = np.einsum("bd,d->b", self.taken, by_day)
        return drawn

    def percentiles(self, found: Detection, shares: Sequence[float]) -> list[tuple[float | None, ...]]:
        """By when these shares of all faults are found: the figure and its interval; None for never within the horizon."""
        which = found.chance.ravel() > NEGLIGIBLE
        delay, chance = found.delay.ravel()[which], found.chance.ravel()[which]
        order = np.argsort(delay, kind="stable")
        delay, chance = delay[order], chance[order]
        day = np.repeat(self.day, found.chance.shape[1])[which][order]
        told = np.cumsum(chance) / len(self.day)
        grid, reached = self._drawn_on_grid(delay, chance, told, day)
        return [
            _percentile(share, np.append(delay, np.inf), told, np.append(grid, np.inf), reached) for share in shares
        ]

    def _drawn_on_grid(self, delay: Floats, chance: Floats, told: Floats, day: Integers) -> tuple[Floats, Floats]:
        """Delays spread evenly over their chances (g,), and the share found by each of them in each draw (b, g)."""
        if not len(delay):
            return delay, np.zeros((len(self.taken), 0))
        place = np.searchsorted(told, np.linspace(0, told[-1], GRID))
        grid = np.unique(delay[np.minimum(place, len(delay) - 1)])
        cell = day * len(grid) + np.minimum(np.searchsorted(grid, delay), len(grid) - 1)
        days = self.taken.shape[1]
        mass = np.bincount(cell, weights=chance, minlength=days * len(grid)).reshape(days, len(grid))
        reached = np.einsum("bd,dg->bg", self.taken, mass.cumsum(axis=1))
        return grid, reached / self._drawn(np.ones(len(self.day)))[:, None]


def _percentile(share: float, delay: Floats, told: Floats, grid: Floats, reached: Floats) -> tuple[float | None, ...]:
    """A percentile and its interval; `delay` and `grid` end with infinity, for never."""
    value = float(delay[np.searchsorted(told, share - TIE)])
    within = np.column_stack([reached >= share - TIE, np.ones(len(reached), dtype=bool)])
    drawn = np.sort(grid[within.argmax(axis=1)])
    low, high = (float(drawn[round(end * (len(drawn) - 1))]) for end in ((1 - LEVEL) / 2, (1 + LEVEL) / 2))
    return tuple(None if x == np.inf else x for x in (value, min(low, value), max(high, value)))
