"""Alarms on held-out days against the budget.

The count of episodes has an exact Poisson interval (90 %). The budget is kept if it lies inside that interval or the count is below it:
if the interval does not begin above what the budget allows.
"""

from dataclasses import dataclass

from pbm.methods.alarm import Limits, episodes
from pbm.methods.intervals import poisson_interval
from pbm.methods.jit import Floats
from pbm.methods.split import Split


@dataclass(frozen=True, slots=True)
class HeldOutAlarms:
    """What held-out days say of a limit.

    Attributes
    ----------
    days, episodes
        Calendar days and alarms in them.
    allowed
        Alarms that the budget allows in these days.
    interval
        Exact 90 % interval of the expected count.
    """

    days: int
    episodes: int
    allowed: float
    interval: tuple[float, float]

    @property
    def kept(self) -> bool:
        """Whether the budget was kept."""
        return self.interval[0] <= self.allowed


def held_out_alarms(path: Floats, limits: Limits, split: Split, budget: float) -> HeldOutAlarms:
    """Count the alarms that opened on held-out days.

    Parameters
    ----------
    path : (n,)
        The statistic over the whole history, as it would have been running.
    limits
        Its control limits.
    split
        Of the same history.
    budget
        False alarms a day.
    """
    count = int((episodes(path, limits).at >= split.at).sum())
    return HeldOutAlarms(split.held_out_days, count, budget * split.held_out_days, poisson_interval(count))
