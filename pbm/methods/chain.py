"""From a raw result to the statistic: admit, transform, statistic; the same laws over a history and one result at a time.

x --admit--> x' --transform--> z = T(x') --statistic--> s
"""

import math
from dataclasses import dataclass, replace

import numpy as np

from pbm.methods.admit import admit
from pbm.methods.alarm import REARM, Limits, judge
from pbm.methods.baseline import Baseline, Mix
from pbm.methods.jit import Floats, Integers, mapped, mapped_pairs, run_ends, scan, standing_at, states_at, until
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
    baseline
        Expected value by patient mix, taken away after the transform; None for none.
    """

    low: float = -math.inf
    high: float = math.inf
    winsorize: bool = False
    transform: str = "none"
    transform_lambda: float = 1.0
    baseline: Baseline | None = None

    @property
    def _admit_par(self) -> tuple[float, float, float]:
        return (float(self.low), float(self.high), float(self.winsorize))

    def one(self, x: float, censor: int, ward: str = "", hour: int = 0, sex: str = "", age: str = "") -> float:
        """The value for one result; not a number if it is dropped. Whose it is and when matters with a baseline only."""
        admitted = admit(x, float(censor), self._admit_par)
        if math.isnan(admitted):
            return math.nan
        y = TRANSFORMS[self.transform].forward(admitted, (self.transform_lambda,))
        return y if self.baseline is None else y - self.baseline.one(ward, hour, sex, age)

    def transformed(self, xs: Floats, censor: Floats) -> Floats:
        """Admitted and transformed results before the baseline, shape (n,); not a number where dropped."""
        admitted = mapped_pairs(admit, xs, censor, self._admit_par)
        if self.transform == "none":
            return admitted
        return mapped(TRANSFORMS[self.transform].forward, admitted, (float(self.transform_lambda),))

    def all(self, xs: Floats, censor: Floats, mix: Mix | None = None) -> Floats:
        """The value for each result, shape (n,); not a number where it is dropped.

        Raises
        ------
        ValueError
            If there is a baseline and no mix to apply it to.
        """
        y = self.transformed(xs, censor)
        if self.baseline is None:
            return y
        if mix is None:
            raise ValueError("a baseline needs the patient mix of the results")
        return y - self.baseline.all(mix)

    def scale(self, x: float) -> float:
        """From the result's unit to the statistic's scale, without truncation."""
        return TRANSFORMS[self.transform].forward(x, (self.transform_lambda,))

    def back(self, z: float) -> float:
        """From the statistic's scale to the result's unit."""
        return TRANSFORMS[self.transform].back(z, (self.transform_lambda,))


@dataclass(frozen=True, slots=True)
class Tracker:
    """A statistic with its parameters and centre.

    Attributes
    ----------
    statistic
        A name in the table of statistics.
    parameter
        The chosen one: window, weight or reference.
    centre
        In-control level of the statistic, on its own scale.
    more
        The statistic's other parameters, in the order of the table.

    Raises
    ------
    ValueError
        If the parameters are not as many as the table names.
    """

    statistic: str
    parameter: float
    centre: float
    more: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        """Every parameter that the law reads is there."""
        wanted = self.law.parameters[1:]
        if len(self.more) != len(wanted):
            raise ValueError(
                f"statistic {self.statistic} needs {len(wanted)} more parameters {wanted}, got {self.more}"
            )

    @property
    def law(self) -> Statistic:
        """The statistic's entry in the table."""
        return STATISTICS[self.statistic]

    @property
    def par(self) -> tuple[float, ...]:
        """Parameters of the step."""
        return (float(self.parameter), *self.more)

    @property
    def named(self) -> dict[str, float]:
        """Every parameter by its name in the table."""
        return dict(zip(self.law.parameters, self.par, strict=True))

    def admissible(self, limits: Limits) -> Limits:
        """The limits, the nearer one moved out where the statistic does not bear them so uneven."""
        below, above = limits.centre - limits.low, limits.high - limits.centre
        if max(below, above) <= self.law.most_uneven * min(below, above):
            return limits
        least = max(below, above) / self.law.most_uneven
        return limits._replace(**({"low": limits.centre - least} if below < above else {"high": limits.centre + least}))

    def start(self) -> list[float]:
        """The state before the first value, for the live monitor."""
        return self.law.start(self.par, self.centre)

    def path(self, z: Floats) -> Floats:
        """The statistic after each value from a fresh start, shape (n,)."""
        return scan(self.law.step, np.array(self.start()), z, self.par)

    def states_at(self, z: Floats, at: Integers) -> Floats:
        """State before each index of `at` (not decreasing), from a fresh start, shape (r, s)."""
        return states_at(self.law.step, np.array(self.start()), z, self.par, at)

    def standing(self, z: Floats, limits: Limits, at: Integers) -> "Standing":
        """The monitor before each index of `at` (not decreasing), having run from a fresh start."""
        begun = np.array(self.start())
        return Standing(*standing_at(self.law.step, judge, begun, z, self.par, limits, at))

    def first_alarms(
        self, z: Floats, standing: "Standing", starts: Integers, ends: Integers, limits: Limits
    ) -> Integers:
        """Index into z of the value that opens the first episode in each z[start:end], -1 where none opens, shape (r,)."""
        begun = (standing.states, standing.episodes)
        return until(self.law.step, judge, begun, starts, ends, z, self.par, limits)

    def first_crossings(
        self, z: Floats, states: Floats, starts: Integers, ends: Integers, low: float, high: float
    ) -> Integers:
        """The same for runs that begin armed: where the statistic first leaves [low, high]."""
        armed = Standing(states, np.zeros(len(states), dtype=np.int64))
        return self.first_alarms(z, armed, starts, ends, Limits(low, high, self.centre, REARM))

    def run_ends(self, z: Floats, low: float, high: float, begin: Floats | None = None) -> Integers:
        """Runs one after the other, each begun afresh: index into z of the value with which each leaves [low, high], shape (r,).

        Parameters
        ----------
        z : (n,)
            Prepared values.
        low, high
            Control limits.
        begin : (s,), optional
            State at the begin of each run; a fresh start if left out.
        """
        return run_ends(self.law.step, np.array(self.start()) if begin is None else begin, z, self.par, low, high)


@dataclass(frozen=True, slots=True)
class Standing:
    """A running monitor before each of many onsets: state of the statistic (r, s), and open episode (r,), 0 where armed."""

    states: Floats
    episodes: Integers


def tracker_for(z: Floats, statistic: str, parameter: float, **more: float) -> Tracker:
    """The statistic centred on its in-control level over prepared values; see `centred`."""
    return centred(z, statistic, parameter, **more)[0]


def centred(z: Floats, statistic: str, parameter: float, **more: float) -> tuple[Tracker, Floats]:
    """The statistic centred on its in-control level over prepared values, and its path over them.

    Parameters
    ----------
    z : (n,)
        In-control values; not a number where dropped.
    statistic, parameter
        A name in the table of statistics, and its window, weight or reference.
    **more
        Its other parameters by name; the level and spread of the values are taken from z where not given.

    Returns
    -------
    tracker
        The statistic.
    path : (n,)
        From a fresh start.

    Raises
    ------
    ValueError
        If z holds no value, or a parameter is missing or is none of the statistic's.
    """
    law = STATISTICS[statistic]
    if np.isnan(z).all():
        raise ValueError("a statistic cannot be centred on no values")
    learned = {"level": float(np.nanmean(z)), "spread": float(np.nanstd(z)), "zero": 0.0}
    known = {**learned, **more}
    wanted = law.parameters[1:]
    if not set(more) <= set(wanted) <= set(known):
        raise ValueError(f"statistic {statistic} takes {wanted} beside its {law.parameter}, got {tuple(more)}")
    begun = Tracker(statistic, parameter, learned[law.begins], tuple(float(known[name]) for name in wanted))
    path = begun.path(z)
    judged = path[~np.isnan(path)] if law.settles else np.zeros(0)
    if not len(judged):
        return begun, path
    settled = replace(begun, centre=float(judged.mean()))
    # A statistic that does not start from its centre runs the same way wherever the centre lies.
    return settled, path if settled.start() == begun.start() else settled.path(z)
