"""Run length of a two-sided CUSUM in closed form: how many results the best statistic needs to see a shift at a given rate of false alarms.

A CUSUM of standardised values with reference k and limit h, whose values have moved by m, has to one side

    ARL = (exp(-2 c b) + 2 c b - 1) / (2 c^2),   c = m - k,  b = h + 1.166;   c = 0 gives b^2

and to both sides 1 / ARL = 1 / ARL(up) + 1 / ARL(down). With k = half of the shift it is the statistic that sees this shift soonest at a
given in-control run length, so no monitor of the same normal values needs fewer results. Where values hang together, their variance is
inflated by f (variance of a mean over what independence would give): a shift of d SD then counts as d / sqrt(f).

Source of the approximation: "Corrected diffusion approximations in certain random walk problems", Advances in Applied Probability
1979;11:701-719. Source of the optimality: "Optimal stopping times for detecting changes in distributions", Annals of Statistics
1986;14:1379-87.
"""

import math
from dataclasses import dataclass

from scipy.optimize import brentq

OVERSHOOT = 1.166
_LARGEST_POWER = 600.0
_HIGHEST_LIMIT = 1e5


def one_sided_run_length(drift: float, limit: float) -> float:
    """Mean results until a one-sided CUSUM passes its limit.

    Parameters
    ----------
    drift
        Mean of a value less the reference, in SD.
    limit
        h, in SD, at least 0.

    Examples
    --------
    >>> round(one_sided_run_length(0.5, 4.0), 2), round(one_sided_run_length(0.0, 4.0), 1)
    (8.34, 26.7)
    """
    b = limit + OVERSHOOT
    power = 2 * drift * b
    if abs(power) < 1e-4:
        return b * b
    return (math.exp(min(-power, _LARGEST_POWER)) + power - 1) / (2 * drift * drift)


@dataclass(frozen=True, slots=True)
class Cusum:
    """A two-sided CUSUM of standardised values, with its reference and limit in SD."""

    reference: float
    limit: float

    @classmethod
    def best_for(cls, shift: float, in_control: float) -> "Cusum":
        """The one that sees a shift soonest among those with a given in-control run length.

        Parameters
        ----------
        shift
            In SD of the values, above 0.
        in_control
            Mean results between two false alarms; a limit of 0 where not even that alarms so often.

        Examples
        --------
        >>> best = Cusum.best_for(1.0, 465.0)
        >>> round(best.limit, 2), round(best.run_length(1.0), 1)
        (4.99, 10.3)
        """
        reference = shift / 2

        def excess(limit: float) -> float:
            return math.log(cls(reference, limit).run_length(0.0) / in_control)

        if excess(0.0) >= 0:
            return cls(reference, 0.0)
        return cls(reference, float(brentq(excess, 0.0, _HIGHEST_LIMIT)))

    def run_length(self, moved: float, spread: float = 1.0) -> float:
        """Mean results until an alarm to either side of values moved by `moved` (in SD in control), of `spread` times their SD."""
        up, down = (
            one_sided_run_length((side * moved - self.reference) / spread, self.limit / spread) for side in (1, -1)
        )
        return 1 / (1 / up + 1 / down)


def results_needed(shift: float, in_control: float, inflation: float = 1.0) -> float:
    """Mean results until the best CUSUM sees a shift; at least 1.

    Parameters
    ----------
    shift
        In SD of the values, above 0.
    in_control
        Mean results between two false alarms.
    inflation
        Of the variance of a mean of successive values.

    Examples
    --------
    >>> round(results_needed(1.0, 465.0), 1), round(results_needed(0.2, 2280.0)), round(results_needed(0.2, 2280.0, inflation=2.0))
    (10.3, 179, 294)
    """
    effective = shift / math.sqrt(inflation)
    return max(1.0, Cusum.best_for(effective, in_control).run_length(effective))
