"""When a fault is found: affected results until detection by the schedule, by the monitor, and by whichever comes first.

Each onset contributes a small distribution: the schedule finds the fault at its k-th event with chance S_{k-1} - S_k, the monitor with its
result T. Together the fault is found at the earlier of the two. What neither finds within the horizon stays as a chance of "never".
"""

from dataclasses import dataclass

import numpy as np

from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers


@dataclass(frozen=True, slots=True)
class Detection:
    """Affected results until detection at each onset, as points with chances.

    Attributes
    ----------
    count : (r, k)
        Affected results reported up to and including the detection.
    chance : (r, k)
        Of detection there; what a row lacks to 1 is never found within the horizon.
    horizon : (r,)
        Results followed.
    """

    count: Integers
    chance: Floats
    horizon: Integers

    @property
    def never(self) -> Floats:
        """Chance that an onset is not found within the horizon, shape (r,)."""
        never: Floats = np.clip(1 - self.chance.sum(axis=1), 0, 1)
        return never

    def mean_each(self) -> Floats:
        """Mean results until detection at each onset, not found counted as found at the horizon, shape (r,)."""
        mean: Floats = (self.chance * self.count).sum(axis=1) + self.never * self.horizon
        return mean

    def quantile(self, share: float) -> float | None:
        """Results by which this share of all faults is found; None if it never is."""
        counts, chances = self.count.ravel(), self.chance.ravel() / len(self.horizon)
        order = np.argsort(counts, kind="stable")
        reached = np.cumsum(chances[order])
        place = int(np.searchsorted(reached, share - 1e-12))
        return float(counts[order][place]) if place < len(order) else None

    def by(self, results: Integers) -> Floats:
        """Chance of detection with at most this many affected results, at each onset, shape (r,)."""
        found: Floats = np.where(self.count <= results[:, None], self.chance, 0.0).sum(axis=1)
        return found


def by_schedule(onsets: Onsets, passed: Floats) -> Detection:
    """Detection by the control schedule; `passed` (k + 1,) or (r, k + 1) is the chance of passing the first i events."""
    inside = onsets.edges < onsets.end[:, None]
    return Detection(
        onsets.edges - onsets.at[:, None], np.where(inside, passed[..., :-1] - passed[..., 1:], 0.0), onsets.length
    )


def by_monitor(onsets: Onsets, to_alarm: Integers) -> Detection:
    """Detection by the monitor's first alarm; `to_alarm` (r,) is 0 where there is none."""
    return Detection(to_alarm[:, None], (to_alarm[:, None] > 0).astype(np.float64), onsets.length)


def by_both(onsets: Onsets, passed: Floats, to_alarm: Integers) -> Detection:
    """Detection by whichever comes first: events before the monitor's alarm, else the alarm."""
    schedule = by_schedule(onsets, passed)
    alarm = np.where(to_alarm > 0, to_alarm, np.iinfo(np.int64).max)
    before = np.where(schedule.count < alarm[:, None], schedule.chance, 0.0)
    left = np.where(to_alarm > 0, 1 - before.sum(axis=1), 0.0)
    return Detection(np.column_stack([schedule.count, to_alarm]), np.column_stack([before, left]), onsets.length)
