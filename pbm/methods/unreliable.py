"""Chance that a result is unreliable: that its error exceeds the allowable total error (TEa).

A result at x under a fault with bias d(x) and analytic SD m sa(x) is unreliable, beyond what it would be in control, with

    p(x, f) = P(|d + m sa Z| > TEa(x)) - P(|sa Z| > TEa(x)),   Z ~ N(0, 1)

TEa is absolute, a percentage of x, or the greater of both; sa(x) = sqrt(s0^2 + (cv x)^2).

Source of the quantity: "Assessing the impact of the frequency of quality control testing on the quality of reported patient results",
Clinical Chemistry 2008;54:2049-54.
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from pbm.methods.jit import Floats


@dataclass(frozen=True, slots=True)
class ErrorModel:
    """Allowable error and analytic SD of an analyte, as functions of the result.

    Attributes
    ----------
    tea_absolute, tea_percent
        TEa in the analyte's unit and in percent of the result; the greater counts (0 where not given).
    sd_absolute, cv_percent
        Parts of the analytic SD.
    """

    tea_absolute: float
    tea_percent: float
    sd_absolute: float
    cv_percent: float

    def tea(self, x: Floats) -> Floats:
        """TEa at each result, in the analyte's unit."""
        return np.maximum(self.tea_absolute, self.tea_percent / 100 * np.abs(x))

    def sd(self, x: Floats) -> Floats:
        """Analytic SD at each result, in the analyte's unit."""
        return np.hypot(self.sd_absolute, self.cv_percent / 100 * x)


def chance_beyond(tea: Floats, bias: Floats, sd: Floats) -> Floats:
    """P(|bias + sd Z| > tea), elementwise; all three in the same unit.

    Without an analytic SD (a result of 0, whose SD is a percentage) the error is the bias alone.

    Examples
    --------
    >>> round(float(chance_beyond(np.array(3.0), np.array(1.0), np.array(1.0))), 6)
    0.022782
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        beyond: Floats = np.where(sd > 0, ndtr((-tea - bias) / sd) + ndtr((bias - tea) / sd), np.abs(bias) > tea)
    return beyond


def chance_unreliable(
    tea: Floats, bias: Floats, sd: Floats, multiple: float = 1.0, level: Floats | float = 0.0
) -> Floats:
    """p(x, f): the chance beyond TEa under the fault less the chance in control, elementwise.

    Parameters
    ----------
    tea, bias, sd
        Of each result, in the same unit.
    multiple
        Factor by which the fault multiplies the analytic SD.
    level
        Bias that is there in control as well.
    """
    return chance_beyond(tea, bias + level, multiple * sd) - chance_beyond(tea, np.zeros_like(bias) + level, sd)
