"""Average run lengths by the tool's own monitor on seeded normal values, with their standard errors."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats

PART = 2_000_000


@lru_cache(maxsize=10)
def normals(part: int) -> Floats:
    """Standard normal values, the same for the same part."""
    return np.random.default_rng((74, part)).standard_normal(PART)


@dataclass(frozen=True, slots=True)
class Average:
    """A mean of many independent figures and 3.5 standard errors of it."""

    value: float
    allowed: float

    @classmethod
    def of(cls, figures: Floats) -> "Average":
        """Of the figures (n,)."""
        return cls(float(figures.mean()), 3.5 * float(figures.std(ddof=1)) / len(figures) ** 0.5)


def runs(
    tracker: Tracker, low: float, high: float, shift: float = 0.0, parts: int = 1, begin: Floats | None = None
) -> Iterator[tuple[Floats, Floats]]:
    """Each part's values, and the places where its runs end; every run begins afresh (or from `begin`)."""
    for part in range(parts):
        z = normals(part) + shift
        yield z, tracker.run_ends(z, low, high, begin).astype(np.float64)


def average_run_length(
    tracker: Tracker, low: float, high: float, shift: float = 0.0, parts: int = 1, begin: Floats | None = None
) -> Average:
    """Values from the begin of a run to the alarm, the alarming one included."""
    lengths = [np.diff(ends, prepend=-1.0) for _, ends in runs(tracker, low, high, shift, parts, begin)]
    return Average.of(np.concatenate(lengths))


def average_run_length_upwards(
    tracker: Tracker, low: float, high: float, shift: float = 0.0, parts: int = 1
) -> Average:
    """Values between alarms of the upper sum of a CUSUM, while the lower one runs beside it.

    When one sum crosses, the other stands at 0, so that starting both again changes nothing for the other.
    """
    lengths = []
    for z, ends in runs(tracker, low, high, shift, parts):
        upwards = ends[z[ends.astype(np.int64)] > 0.0]
        lengths.append(np.diff(upwards, prepend=-1.0))
    return Average.of(np.concatenate(lengths))
