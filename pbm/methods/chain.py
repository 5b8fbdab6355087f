"""From a raw result to the statistic: admit, transform, statistic; the same laws over a history and one result at a time.

x --admit--> x' --transform--> z = T(x') --statistic--> s
"""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.admit import admit
from pbm.methods.jit import Floats, Integers, mapped, mapped_pairs, scan, states_at, until
from pbm.methods.statistics import STATISTICS, Statistic
from pbm.methods.transform import TRANSFORMS


@dataclass(frozen=True, slots=True)
class Preparation:
    """How a raw result becomes the value that the statistic takes.

    Attributes
    ----------
    low, high
        Truncation limits in the result's unit; infinite where open.
    winsorize
        Set a value outside to the limit instead of dropping it.
    transform
        "none", "log" or "boxcox".
    transform_lambda
        Of Box-Cox; ignored by the others.
    """

    low: float = -math.inf
    high: float = math.inf
    winsorize: bool = False
    transform: str = "none"
    transform_lambda: float = 1.0

    @property
    def _admit_par(self) -> tuple[float, float, float]:
        return (float(self.low), float(self.high), float(self.winsorize))

    def one(self, x: float, censor: int) -> float:
        """The value for one result; not a number if it is dropped."""
        admitted = admit(x, float(censor), self._admit_par)
        if math.isnan(admitted):
            return math.nan
        return TRANSFORMS[self.transform].forward(admitted, (self.transform_lambda,))

    def all(self, xs: Floats, censor: Floats) -> Floats:
        """The value for each result, shape (n,); not a number where it is dropped."""
        admitted = mapped_pairs(admit, xs, censor, self._admit_par)
        if self.transform == "none":
            return admitted
        return mapped(TRANSFORMS[self.transform].forward, admitted, (float(self.transform_lambda),))

    def scale(self, x: float) -> float:
        """From the result's unit to the statistic's scale, without truncation."""
        return TRANSFORMS[self.transform].forward(x, (self.transform_lambda,))

    def back(self, z: float) -> float:
        """From the statistic's scale to the result's unit."""
        return TRANSFORMS[self.transform].back(z, (self.transform_lambda,))


@dataclass(frozen=True, slots=True)
class Tracker:
    """A statistic with its parameter and centre.

    Attributes
    ----------
    statistic
        A name in the table of statistics.
    parameter
        Window or weight.
    centre
        In-control level of the statistic, on its own scale.
    """

    statistic: str
    parameter: float
    centre: float

    @property
    def law(self) -> Statistic:
        """The statistic's entry in the table."""
        return STATISTICS[self.statistic]

    @property
    def par(self) -> tuple[float, ...]:
        """Parameters of the step."""
        return (float(self.parameter),)

    def start(self) -> list[float]:
        """The state before the first value, for the live monitor."""
        return self.law.start(self.par, self.centre)

    def path(self, z: Floats) -> Floats:
        """The statistic after each value from a fresh start, shape (n,)."""
        return scan(self.law.step, np.array(self.start()), z, self.par)

    def states_at(self, z: Floats, at: Integers) -> Floats:
        """State before each index of `at` (not decreasing), from a fresh start, shape (r, s)."""
        return states_at(self.law.step, np.array(self.start()), z, self.par, at)

    def first_crossings(
        self, z: Floats, states: Floats, starts: Integers, ends: Integers, low: float, high: float
    ) -> Integers:
        """Index into z of the first value at which the statistic leaves [low, high], -1 where it does not, shape (r,)."""
        return until(self.law.step, states, starts, ends, z, self.par, low, high)


def tracker_for(z: Floats, statistic: str, parameter: float) -> Tracker:
    """The statistic centred on its in-control level over prepared values z, shape (n,)."""
    mean = float(np.nanmean(z))
    if STATISTICS[statistic].starts_at_centre:
        return Tracker(statistic, parameter, mean)
    path = Tracker(statistic, parameter, mean).path(z)
    judged = path[~np.isnan(path)]
    return Tracker(statistic, parameter, float(judged.mean()) if len(judged) else mean)
