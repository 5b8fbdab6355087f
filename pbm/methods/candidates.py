"""Candidates for a monitor: truncation limits, transforms, statistics and their parameters.

Truncation limits are pairs of quantiles of the training results, from none to tight, rounded to the reported step. A transform other than
none is tried only where the results are positive and skewed.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from scipy.stats import boxcox_normmax, skew

from pbm.methods.chain import Preparation
from pbm.methods.jit import Floats
from pbm.methods.reported_step import multiples

QUANTILE_PAIRS = ((0.0, 1.0), (0.001, 0.999), (0.005, 0.995), (0.02, 0.98), (0.05, 0.95), (0.1, 0.9))
WINSORIZED_PAIRS = ((0.005, 0.995), (0.02, 0.98), (0.05, 0.95))
PARAMETERS: dict[str, tuple[float, ...]] = {
    "ewma": (0.3, 0.2, 0.1, 0.05, 0.03, 0.015, 0.0075),
    "mean": (5, 10, 20, 40, 80, 160),
    "median": (21, 51, 101),
}
SKEWED = 0.5
ENOUGH_FOR_LAMBDA = 5_000


@dataclass(frozen=True, slots=True)
class Candidate:
    """One choice for a monitor, before it has limits."""

    preparation: Preparation
    statistic: str
    parameter: float

    @property
    def complexity(self) -> tuple[int, int, int, int]:
        """Order of simplicity: baseline, statistic, transform, truncation."""
        return (
            self.preparation.baseline is not None,
            list(PARAMETERS).index(self.statistic),
            ("none", "log", "boxcox").index(self.preparation.transform),
            math.isfinite(self.preparation.low) + self.preparation.winsorize,
        )


def preparations(x: Floats, step: float, random: np.random.Generator) -> list[Preparation]:
    """Truncation and transform choices for training results x, shape (n,), reported in multiples of `step`."""
    limits = dict.fromkeys([(*_truncation(x, pair, step), False) for pair in QUANTILE_PAIRS])
    limits |= dict.fromkeys([(*_truncation(x, pair, step), True) for pair in WINSORIZED_PAIRS])
    return [
        Preparation(low, high, winsorize, transform, power)
        for transform, power in _transforms(x, random)
        for low, high, winsorize in limits
        if low < high and (math.isfinite(low) or not winsorize)
    ]


def _truncation(x: Floats, pair: tuple[float, float], step: float) -> tuple[float, float]:
    if pair == (0.0, 1.0):
        return -math.inf, math.inf
    low, high = np.quantile(x, pair)
    ends = multiples(np.array([np.floor(low / step + 1e-9), np.ceil(high / step - 1e-9)]), step)
    return float(ends[0]), float(ends[1])


def _transforms(x: Floats, random: np.random.Generator) -> list[tuple[str, float]]:
    if x.min() <= 0 or np.ptp(x) == 0 or abs(float(skew(x))) < SKEWED:
        return [("none", 1.0)]
    sample = x if len(x) <= ENOUGH_FOR_LAMBDA else random.choice(x, ENOUGH_FOR_LAMBDA, replace=False)
    power = round(float(np.clip(boxcox_normmax(sample, method="mle"), -2, 2)), 2) if np.ptp(sample) > 0 else 0.0
    return [("none", 1.0), ("log", 0.0)] + ([("boxcox", power)] if abs(power) >= 0.05 else [])


def candidates(of: list[Preparation], longest: int) -> Iterator[Candidate]:
    """Every statistic and parameter on every preparation; windows longer than `longest` values are left out."""
    for preparation in of:
        for statistic, parameters in PARAMETERS.items():
            for parameter in parameters:
                if (parameter if parameter > 1 else 2 / parameter) <= longest:
                    yield Candidate(preparation, statistic, parameter)
