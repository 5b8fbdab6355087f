"""Whether a monitor earns its place, judged on held-out days by what it saves beside the control schedule.

    useful            the average over the faults and the worst case both fall by at least a tenth, and the alarm budget is kept
    marginal          one of the two falls by at least a tenth; or both, but the budget is not kept
    not useful here   neither; or it saves no more than its false alarms would

The last is judged against the same alarms at the times at which they come without any fault: an alarm at random stops reporting too, and so
also "saves" unreliable results. A monitor must save more than that, over its whole 90 % interval.

The thresholds are the project's own: below a tenth, nobody at the bench would see a difference.
"""

from dataclasses import dataclass
from typing import Literal

WORTHWHILE = 0.1
Word = Literal["useful", "marginal", "not useful here"]


@dataclass(frozen=True, slots=True)
class Gain:
    """What the monitors of a stream save on held-out days.

    Attributes
    ----------
    average, worst
        Share of the expected unreliable results saved: averaged over the faults, and in the worst case.
    beyond_false_alarms
        Lower end of the interval of the results saved, on average over the faults, beyond those that false alarms save.
    kept
        Whether the alarm budget was kept.
    """

    average: float
    worst: float
    beyond_false_alarms: float
    kept: bool

    @property
    def by_chance(self) -> bool:
        """Whether it saves no more than false alarms would."""
        return self.beyond_false_alarms <= 0

    @property
    def verdict(self) -> Word:
        """The verdict."""
        worthwhile = (self.average >= WORTHWHILE) + (self.worst >= WORTHWHILE)
        if self.by_chance or not worthwhile:
            return "not useful here"
        return "useful" if worthwhile == 2 and self.kept else "marginal"
