"""Where an error began and how large it is, judged from the results before an alarm.

For a step at admitted value k of the last n, with in-control centre c and variance v of the values and an inflation factor f for their
autocorrelation and a slow wandering of the level of variance t^2, the mean of the n - k + 1 values since has

    log likelihood gain  g(k) = (mean - c)^2 / (2 (v f / (n - k + 1) + t^2)),   size on the statistic's scale = mean - c

Without the wandering a long, small offset, such as the patient mix of a day brings, would be preferred to a short, large error.

The steps are weighed by exp(g(k)) times the chance that the control events since would all have passed under that size. The size is the
weighted mean of theirs: that of the heaviest step alone would be the largest that chance allows. It is read off with the slope of the
admitted mean (truncation lets a truncated mean move by only Var(admitted) / Var(all) of a true shift).

Source of the likelihood: "Inference about the change-point in a sequence of random variables", Biometrika 1970;57:1-17.
"""

from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Floats


@dataclass(frozen=True, slots=True)
class InControl:
    """In-control behaviour of admitted values on the statistic's scale.

    Attributes
    ----------
    centre, spread
        Mean and SD.
    inflation
        Variance of a mean of many values over what independence would give (1 or more).
    slope
        Movement of the admitted mean for a unit of true shift.
    wander
        SD of the slow wandering of the level.
    """

    centre: float
    spread: float
    inflation: float = 1.0
    slope: float = 1.0
    wander: float = 0.0


@dataclass(frozen=True, slots=True)
class Onset:
    """The step before an alarm.

    Attributes
    ----------
    start, earliest, latest
        Index of the most likely first affected value and the ends of its 90 % set.
    shift
        True shift on the statistic's scale, averaged over where the step may lie.
    weight : (n,)
        Posterior weight of a step at each value; sums to 1.
    """

    start: int
    earliest: int
    latest: int
    shift: float
    weight: Floats


def find_onset(z: Floats, in_control: InControl, side: int, log_chance_passed: Floats | None = None) -> Onset:
    """The most likely onset of a step in the values up to an alarm.

    Parameters
    ----------
    z : (n,)
        Admitted, prepared values in order; the last one raised the alarm.
    in_control
        Their in-control behaviour.
    side
        +1 or -1: the side of the alarm; steps to the other side are not considered.
    log_chance_passed : (n,), optional
        Log of the chance that the control events since each value would have passed under a step there.

    Raises
    ------
    ValueError
        If there is no value.
    """
    if len(z) == 0:
        raise ValueError("an onset needs at least one value")
    deviation = side * (z - in_control.centre)
    since = np.arange(len(z), 0, -1)
    mean = np.maximum(np.cumsum(deviation[::-1])[::-1] / since, 0.0)
    variance = in_control.spread**2 * in_control.inflation / since + in_control.wander**2
    gain = mean**2 / (2 * variance)
    if log_chance_passed is not None:
        gain = gain + log_chance_passed
    weight = np.exp(gain - gain.max())
    weight /= weight.sum()
    start = int(np.argmax(weight))
    likely = np.flatnonzero(weight >= _density_cut(weight, 0.9))
    return Onset(start, int(likely[0]), int(likely[-1]), side * float(weight @ mean) / in_control.slope, weight)


def _density_cut(weight: Floats, level: float) -> float:
    """Smallest weight inside the highest-density set that holds `level` of the whole."""
    ranked = np.sort(weight)[::-1]
    return float(ranked[min(int(np.searchsorted(np.cumsum(ranked), level)), len(ranked) - 1)])
