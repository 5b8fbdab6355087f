"""Training days first, held-out days after: limits are chosen on the one and confirmed on the other."""

from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Integers

TRAINING_SHARE = 2 / 3


@dataclass(frozen=True, slots=True)
class Split:
    """Results in two parts.

    Attributes
    ----------
    days : (n,)
        Local day of each result, not decreasing.
    at
        Index of the first held-out result.
    """

    days: Integers
    at: int

    @property
    def training_days(self) -> int:
        """Calendar days from the first to the last training day."""
        return int(self.days[self.at - 1] - self.days[0] + 1)

    @property
    def held_out_days(self) -> int:
        """Calendar days from the first to the last held-out day."""
        return int(self.days[-1] - self.days[self.at] + 1)


def first_held_out_day(days: Integers) -> int:
    """The day after two thirds of the days that have results; `days` (n,) is the local day of each result, at least two distinct."""
    distinct = np.unique(days)
    return int(distinct[int(len(distinct) * TRAINING_SHARE)])


def split_at(days: Integers, first_held_out: int) -> Split:
    """Split at a day, which begins the held-out part."""
    return Split(days, int(np.searchsorted(days, first_held_out)))
