"""One fault tried on a stretch of history at many onsets: what the statistic meets, and what it costs until somebody knows.

An onset is drawn among the results of a stretch, every result being equally likely to be the first affected one. From there the faulted
results are read until the monitor's first alarm or the horizon. The same onsets serve every candidate and every fault, so that comparisons
are not blurred by the draw.
"""

from dataclasses import dataclass, replace

import numpy as np

from pbm.methods.alarm import Limits
from pbm.methods.baseline import Mix
from pbm.methods.chain import Preparation, Standing, Tracker
from pbm.methods.expected import Exposure, Onsets, exposure
from pbm.methods.faults import Chance, Fault, Reporting, inflict
from pbm.methods.jit import Floats, Integers
from pbm.methods.unreliable import ErrorModel, chance_unreliable


@dataclass(frozen=True, slots=True)
class Stretch:
    """Results of one stream in order of time.

    Attributes
    ----------
    time : (n,)
        UTC microseconds.
    value, censor : (n,)
        As reported.
    mix
        Wards, hours of the week, sex and age.
    error, reporting
        The analyte's error model and how it is reported.
    chance
        The random part of the faults, drawn once.
    level
        Bias that all results have in control already, in TEa: what if calibration or lot were others.
    """

    time: Integers
    value: Floats
    censor: Floats
    mix: Mix
    error: ErrorModel
    reporting: Reporting
    chance: Chance
    level: float = 0.0

    def __len__(self) -> int:
        return len(self.time)

    def prepared(self, preparation: Preparation) -> Floats:
        """The results as prepared for a statistic, shape (n,)."""
        return preparation.all(self.measured, self.censor, self.mix)

    @property
    def measured(self) -> Floats:
        """The results at their level, shape (n,)."""
        if self.level == 0:
            return self.value
        return np.where(self.censor == 0, self.value + self.level * self.error.tea(self.value), self.value)

    def at_level(self, level: float) -> "Stretch":
        """The same results at another level."""
        return replace(self, level=level)


def draw_onsets(first: int, last: int, count: int, random: np.random.Generator) -> Integers:
    """Up to `count` onsets spread over the results first ... last - 1: one at random in each of as many equal parts, ascending."""
    count = min(count, last - first)
    part = (np.arange(count) + random.random(count)) / max(count, 1)
    return first + (part * (last - first)).astype(np.int64)


@dataclass(frozen=True, slots=True)
class Trial:
    """A fault at many onsets.

    Attributes
    ----------
    fault, onsets
        What was tried, and where.
    values, censor, mix : (m,)
        Results as reported under the fault, and who they came from.
    starts, ends : (r,)
        Which of them each onset reads.
    exposure
        Expected unreliable results along each onset.
    """

    fault: Fault
    onsets: Onsets
    values: Floats
    censor: Floats
    mix: Mix
    starts: Integers
    ends: Integers
    exposure: Exposure

    def prepared(self, preparation: Preparation) -> Floats:
        """The faulted results as prepared for a statistic, shape (m,)."""
        return preparation.all(self.values, self.censor, self.mix)

    def results_to_alarm(self, z: Floats, tracker: Tracker, limits: Limits, standing: Standing) -> Integers:
        """Offered results from the onset to the alarm, both included; 0 where there is none within the horizon.

        An episode that is open at the onset is a false alarm already on the bench: the fault is found by the next one.

        Parameters
        ----------
        z : (m,)
            The faulted results as prepared for the statistic.
        tracker, limits
            The statistic and its control limits.
        standing
            The monitor before each onset.
        """
        found = tracker.first_alarms(z, standing, self.starts, self.ends, limits)
        return np.where(found >= 0, found - self.starts + 1, 0)


def trial(stretch: Stretch, fault: Fault, onsets: Onsets, passed: Floats) -> Trial:
    """Try a fault at the given onsets; `passed`, (k + 1,) or (r, k + 1), is the schedule's chance of passing the first i events."""
    if fault.kind == "drift":
        return _drift_trial(stretch, fault, onsets, passed)
    error, x = stretch.error, stretch.value
    values, censor = inflict(stretch.measured, stretch.censor, fault, error, stretch.reporting, stretch.chance)
    p = _chance_unreliable(x, fault, error, fault.bias(x, error), stretch.level)
    return Trial(fault, onsets, values, censor, stretch.mix, onsets.at, onsets.end, exposure(onsets, p, passed))


def _chance_unreliable(x: Floats, fault: Fault, error: ErrorModel, bias: Floats, level: float) -> Floats:
    tea = error.tea(x)
    return fault.share_hit * chance_unreliable(tea, bias, error.sd(x), fault.multiple, level * tea)


def _drift_trial(stretch: Stretch, fault: Fault, onsets: Onsets, passed: Floats) -> Trial:
    """A drift grows from each onset, so each onset has results of its own, laid one after the other."""
    ends = np.cumsum(onsets.length)
    starts = ends - onsets.length
    rows = np.concatenate([np.arange(a, b) for a, b in zip(onsets.at, onsets.end, strict=True)])
    ages = (np.arange(len(rows)) - np.repeat(starts, onsets.length) + 1).astype(np.float64)
    growth, x = fault.growth(ages), stretch.value[rows]
    chance = Chance(stretch.chance.cell[rows], stretch.chance.normal[rows], stretch.chance.uniform[rows])
    values, censor = inflict(
        stretch.measured[rows], stretch.censor[rows], fault, stretch.error, stretch.reporting, chance, growth
    )
    p = np.zeros((len(onsets.at), int(onsets.length.max())))
    inside = np.arange(p.shape[1])[None, :] < onsets.length[:, None]
    p[inside] = _chance_unreliable(x, fault, stretch.error, growth * fault.bias(x, stretch.error), stretch.level)
    return Trial(fault, onsets, values, censor, stretch.mix.rows(rows), starts, ends, exposure(onsets, p, passed))


def alarm_and_stop(
    to_alarm: Integers, onsets: Onsets, lag_results: int, lag_microseconds: int, time: Integers
) -> tuple[Integers, Integers]:
    """With which affected result the alarm comes, and how many are reported before the stop; the horizon where there is no alarm.

    Parameters
    ----------
    to_alarm : (r,)
        From `Trial.results_to_alarm`.
    lag_results, lag_microseconds
        What is still reported after the alarm: this many results, or for this long.
    time : (n,)
        Of the history's results.

    Returns
    -------
    alarm, stop : (r,)
    """
    alarm = np.where(to_alarm > 0, to_alarm, onsets.length)
    when = time[np.minimum(onsets.at + alarm, onsets.end) - 1] + lag_microseconds
    stop = alarm + lag_results if lag_microseconds == 0 else np.searchsorted(time, when, side="right") - onsets.at
    return alarm, np.where(to_alarm > 0, np.minimum(np.maximum(stop, alarm), onsets.length), onsets.length)
