"""Truncation limits worth trying: quantile pairs from none to tight, one-sided for skewed results, and outlier fences.

A fence lies outside the quartiles by a multiple of the distance between them. All limits are rounded outward to the reported step.

Source of the fences: "Exploratory data analysis", 1977 (1.5 and 3 distances between the quartiles).
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import skew

from pbm.methods.jit import Floats
from pbm.methods.reported_step import multiples

Truncation = tuple[float, float, bool]
SKEWED = 0.5


@dataclass(frozen=True, slots=True)
class TruncationGrid:
    """What is tried, in shares of the results beyond the limits on either side; 0 is no limit.

    Attributes
    ----------
    truncated, winsorized
        Beyond which results are dropped, and at which they are set to the limit.
    one_sided
        The same on the long side only, where the results are skewed.
    fences
        Multiples of the distance between the quartiles, truncated and winsorized.
    """

    truncated: tuple[float, ...]
    winsorized: tuple[float, ...]
    one_sided: tuple[float, ...] = ()
    fences: tuple[float, ...] = ()

    def of(self, x: Floats, step: float) -> list[Truncation]:
        """Low, high (infinite where open) and whether to winsorize, for results x (n,) reported in multiples of `step`."""
        given = dict.fromkeys((*_rounded_outward(ends, step), set_to) for *ends, set_to in self._exact(x))
        return [
            (low, high, set_to) for low, high, set_to in given if low < high and _limits_anything(low, high, set_to)
        ]

    def _exact(self, x: Floats) -> Iterator[tuple[float, float, bool]]:
        for shares, set_to in ((self.truncated, False), (self.winsorized, True)):
            for share in shares:
                yield *_quantiles(x, share, share), set_to
        leaning = skewness(x)
        for share in self.one_sided if abs(leaning) >= SKEWED else ():
            for set_to in (False, True):
                yield *(_quantiles(x, 0.0, share) if leaning > 0 else _quantiles(x, share, 0.0)), set_to
        low, high = np.quantile(x, (0.25, 0.75))
        for fence in self.fences:
            for set_to in (False, True):
                yield float(low - fence * (high - low)), float(high + fence * (high - low)), set_to


def skewness(x: Floats) -> float:
    """Third standardised moment of x (n,); 0 where all are equal."""
    return float(skew(x)) if np.ptp(x) > 0 else 0.0


def _quantiles(x: Floats, below: float, above: float) -> tuple[float, float]:
    """Limits with such shares beyond them; a share of 0 leaves a side open."""
    low = float(np.quantile(x, below)) if below > 0 else -math.inf
    high = float(np.quantile(x, 1 - above)) if above > 0 else math.inf
    return low, high


def _rounded_outward(ends: Sequence[float], step: float) -> tuple[float, float]:
    low, high = multiples(np.array([np.floor(ends[0] / step + 1e-9), np.ceil(ends[1] / step - 1e-9)]), step)
    return float(low), float(high)


def _limits_anything(low: float, high: float, winsorize: bool) -> bool:
    return not winsorize or math.isfinite(low) or math.isfinite(high)
