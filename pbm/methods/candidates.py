"""Candidates for a monitor: truncation limits, transforms, statistics and their parameters.

A transform other than none is tried only where the results are positive and skewed, and with fewer truncation limits, since it tames a
tail itself. A moving median and a moving share go by the order of the values, which no transform changes: they are tried on the results
as they are. For shifts there are the statistics of a level and of the tails, for imprecision those of a spread.
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.stats import boxcox_normmax

from pbm.methods.chain import Preparation, Tracker, centred
from pbm.methods.jit import Floats
from pbm.methods.truncations import SKEWED, TruncationGrid, skewness

More = tuple[tuple[str, float], ...]
ENOUGH_FOR_LAMBDA = 5_000
BY_ORDER = ("median", "share")
PLAIN: tuple[More, ...] = ((),)


@dataclass(frozen=True, slots=True)
class Family:
    """A statistic with the parameters to try: window, weight or reference, and what else it needs to be told.

    That is an exponent for a batch; for a moving share the share of the values on either side `beyond` which it counts.
    """

    statistic: str
    parameters: tuple[float, ...]
    more: tuple[More, ...] = PLAIN


@dataclass(frozen=True, slots=True)
class Grid:
    """What is tried: truncation limits of results as they are, and of transformed ones; statistics for a shift, and for imprecision."""

    truncations: TruncationGrid
    transformed: TruncationGrid
    shift: tuple[Family, ...]
    imprecision: tuple[Family, ...]

    def watching(self, watches: str) -> tuple[Family, ...]:
        """The statistics that watch for "shift" or "imprecision"."""
        return self.shift if watches == "shift" else self.imprecision


def _counted_beyond(*shares: float) -> tuple[More, ...]:
    return tuple((("beyond", share),) for share in shares)


WHOLE_GRID = Grid(
    TruncationGrid(
        truncated=(0.0, 0.0005, 0.0025, 0.005, 0.01, 0.02, 0.05, 0.1),
        winsorized=(0.0025, 0.005, 0.02, 0.05, 0.1),
        one_sided=(0.01, 0.05, 0.1),
        fences=(1.5, 3.0),
    ),
    TruncationGrid(truncated=(0.0, 0.005, 0.02, 0.05), winsorized=(0.005, 0.02)),
    shift=(
        Family("ewma", (0.4, 0.3, 0.2, 0.14, 0.1, 0.07, 0.05, 0.03, 0.02, 0.01, 0.005)),
        Family("mean", (3, 5, 10, 15, 20, 30, 50, 80, 120, 200, 400)),
        Family("median", (11, 21, 35, 51, 81, 121)),
        Family("cusum", (0.1, 0.2, 0.3, 0.5, 0.75, 1.0)),
        Family("share", (25, 50, 100), _counted_beyond(0.05, 0.15, 0.3)),
        Family("batch", (10, 20, 40, 80), ((("exponent", 0.5),), (("exponent", 1.0),))),
    ),
    imprecision=(
        Family("ewsd", (0.1, 0.07, 0.05, 0.03, 0.02, 0.01, 0.005)),
        Family("sd", (15, 25, 40, 60, 100, 200)),
        Family("share", (25, 50, 100, 200), _counted_beyond(0.02, 0.05, 0.15)),
    ),
)
QUICK_GRID = Grid(
    TruncationGrid(truncated=(0.0, 0.001, 0.005, 0.02, 0.05, 0.1), winsorized=(0.005, 0.02, 0.05)),
    TruncationGrid(truncated=(0.0, 0.005, 0.02), winsorized=(0.005,)),
    shift=(
        Family("ewma", (0.3, 0.2, 0.1, 0.05, 0.03, 0.015, 0.0075)),
        Family("mean", (5, 10, 20, 40, 80, 160)),
        Family("median", (21, 51, 101)),
    ),
    imprecision=(Family("ewsd", (0.1, 0.05, 0.02, 0.01)), Family("sd", (25, 50, 100))),
)
# In order of simplicity.
FAMILIES = tuple(dict.fromkeys(family.statistic for family in (*WHOLE_GRID.shift, *WHOLE_GRID.imprecision)))


@dataclass(frozen=True, slots=True)
class Candidate:
    """One choice for a monitor, before it has limits.

    Attributes
    ----------
    preparation
        Truncation, transform and baseline.
    statistic, parameter
        Name, and its window, weight or reference.
    more
        Its other parameters that are chosen and not learned, as in `Family`.
    """

    preparation: Preparation
    statistic: str
    parameter: float
    more: More = ()

    @property
    def complexity(self) -> tuple[int, int, int, int]:
        """Order of simplicity: baseline, statistic, transform, truncation."""
        return (
            self.preparation.baseline is not None,
            FAMILIES.index(self.statistic),
            ("none", "log", "boxcox").index(self.preparation.transform),
            math.isfinite(self.preparation.low) + math.isfinite(self.preparation.high) + self.preparation.winsorize,
        )

    def centred(self, z: Floats) -> tuple[Tracker, Floats]:
        """The statistic centred on its in-control level over prepared values z, shape (n,), and its path over them."""
        more = dict(self.more)
        if "beyond" in more:
            share = more.pop("beyond")
            more["low"], more["high"] = (float(end) for end in np.nanquantile(z, (share, 1 - share)))
        return centred(z, self.statistic, self.parameter, **more)


def preparations(x: Floats, step: float, random: np.random.Generator, grid: Grid = WHOLE_GRID) -> list[Preparation]:
    """Truncation and transform choices for training results x, shape (n,), reported in multiples of `step`."""
    return [
        Preparation(low, high, winsorize, transform, power)
        for transform, power in _transforms(x, random)
        for low, high, winsorize in (grid.truncations if transform == "none" else grid.transformed).of(x, step)
    ]


def _transforms(x: Floats, random: np.random.Generator) -> list[tuple[str, float]]:
    if x.min() <= 0 or abs(skewness(x)) < SKEWED:
        return [("none", 1.0)]
    sample = x if len(x) <= ENOUGH_FOR_LAMBDA else random.choice(x, ENOUGH_FOR_LAMBDA, replace=False)
    power = round(float(np.clip(boxcox_normmax(sample, method="mle"), -2, 2)), 2) if np.ptp(sample) > 0 else 0.0
    return [("none", 1.0), ("log", 0.0)] + ([("boxcox", power)] if abs(power) >= 0.05 else [])


def candidates(of: Sequence[Preparation], longest: int, families: Sequence[Family]) -> Iterator[Candidate]:
    """Every statistic and parameter on every preparation; windows longer than `longest` values are left out."""
    for preparation in of:
        for family in families:
            if preparation.transform != "none" and family.statistic in BY_ORDER:
                continue
            for parameter in family.parameters:
                if _remembers(family.statistic, parameter) <= longest:
                    yield from (Candidate(preparation, family.statistic, parameter, more) for more in family.more)


def _remembers(statistic: str, parameter: float) -> float:
    """About how many values the statistic remembers."""
    return 1.0 if statistic == "cusum" else parameter if parameter > 1 else 2 / parameter
