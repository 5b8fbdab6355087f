"""When a fault is found: affected results, or hours, until detection by the schedule, by the monitor, and by whichever comes first.

Each onset contributes a small distribution: the schedule finds the fault at its k-th event with chance S_{k-1} - S_k, the monitor with its
result T. Together the fault is found at the earlier of the two. What neither finds within the horizon stays as a chance of "never".
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pbm.methods.expected import Onsets
from pbm.methods.jit import Floats, Integers


@dataclass(frozen=True, slots=True)
class Detection:
    """Affected results, or hours, until detection at each onset, as points with chances.

    Attributes
    ----------
    delay : (r, k)
        Affected results reported up to and including the detection, or hours since the onset.
    chance : (r, k)
        Of detection there; what a row lacks to 1 is never found within the horizon.
    horizon : (r,)
        Results, or hours, followed.
    """

    delay: Floats
    chance: Floats
    horizon: Floats

    @property
    def never(self) -> Floats:
        """Chance that an onset is not found within the horizon, shape (r,)."""
        never: Floats = np.clip(1 - self.chance.sum(axis=1), 0, 1)
        return never

    def mean_each(self) -> Floats:
        """Mean delay at each onset, not found counted as found at the horizon, shape (r,)."""
        mean: Floats = (self.chance * self.delay).sum(axis=1) + self.never * self.horizon
        return mean

    def quantile(self, share: float) -> float | None:
        """Delay by which this share of all faults is found; None if it never is."""
        return self.quantiles((share,))[0]

    def quantiles(self, shares: Sequence[float]) -> list[float | None]:
        """The same for several shares."""
        counted = self.chance.ravel() > 0
        delays, chances = self.delay.ravel()[counted], self.chance.ravel()[counted] / len(self.horizon)
        order = np.argsort(delays, kind="stable")
        places = np.searchsorted(np.cumsum(chances[order]), np.array(shares) - 1e-12)
        return [float(delays[order[place]]) if place < len(order) else None for place in places.tolist()]

    def timed(self, hours: Floats, horizon: Floats) -> "Detection":
        """The same in hours, those of each point (r, k) and those followed (r,)."""
        return Detection(hours, self.chance, horizon)

    def by(self, results: Integers) -> Floats:
        """Chance of detection with at most this many affected results, at each onset, shape (r,)."""
        found: Floats = np.where(self.delay <= results[:, None], self.chance, 0.0).sum(axis=1)
        return found


def by_schedule(onsets: Onsets, passed: Floats) -> Detection:
    """Detection by the control schedule; `passed` (k + 1,) or (r, k + 1) is the chance of passing the first i events."""
    inside = onsets.edges < onsets.end[:, None]
    return _detection(onsets.counts, np.where(inside, passed[..., :-1] - passed[..., 1:], 0.0), onsets)


def by_monitor(onsets: Onsets, to_alarm: Integers) -> Detection:
    """Detection by the monitor's first alarm; `to_alarm` (r,) is 0 where there is none."""
    return _detection(to_alarm[:, None], (to_alarm[:, None] > 0).astype(np.float64), onsets)


def by_both(onsets: Onsets, passed: Floats, to_alarm: Integers) -> Detection:
    """Detection by whichever comes first: events before the monitor's alarm, else the alarm."""
    schedule = by_schedule(onsets, passed)
    alarm = np.where(to_alarm > 0, to_alarm, np.iinfo(np.int64).max)
    before = np.where(onsets.counts < alarm[:, None], schedule.chance, 0.0)
    left = np.where(to_alarm > 0, 1 - before.sum(axis=1), 0.0)
    return _detection(np.column_stack([onsets.counts, to_alarm]), np.column_stack([before, left]), onsets)


def _detection(count: Integers, chance: Floats, onsets: Onsets) -> Detection:
    return Detection(count.astype(np.float64), chance, onsets.length.astype(np.float64))
