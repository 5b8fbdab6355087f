"""Runs of near-identical values: successive results so alike that they look like one material measured again and again.

A window of m successive results is told where it spans no more than the method's own imprecision (RANGE analytic SD and a step) and where
independent draws from the stream make so narrow a window unlikely. If the stream has the share q of its results between the window's
lowest and highest value, m independent results lie that close together with a chance of about

    m q^(m-1) - (m-1) q^m                                                   (distribution of the range of m uniform values)

and it is told where fewer than EXPECTED such windows were to be expected among all. Overlapping windows are one run. The first condition
keeps apart what is merely alike: a round of dialysis patients.
"""

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import maximum_filter1d, minimum_filter1d

from pbm.methods.jit import Floats

WINDOWS = (6, 12, 24)
RANGE = 4.0
EXPECTED = 0.001


@dataclass(frozen=True, slots=True)
class SteadyRun:
    """Results first ... last, all between lowest and highest.

    Attributes
    ----------
    expected
        Windows as narrow as its narrowest one to be expected among independent results of this stream.
    """

    first: int
    last: int
    lowest: float
    highest: float
    expected: float


def find_steady_runs(x: Floats, sd: Floats, step: float) -> list[SteadyRun]:
    """The runs of a stream in order of time.

    Parameters
    ----------
    x : (n,)
        Results in order of time.
    sd : (n,)
        Analytic SD at each.
    step
        In which results are reported.
    """
    expected = np.full(len(x), np.inf)
    for m in WINDOWS:
        if len(x) >= 2 * m:
            _mark(expected, x, sd, step, m)
    inside = np.isfinite(expected)
    edges = np.flatnonzero(np.diff(np.concatenate([[False], inside, [False]]).astype(int)))
    return [_run(x, expected, int(first), int(end)) for first, end in edges.reshape(-1, 2)]


def _run(x: Floats, expected: Floats, first: int, end: int) -> SteadyRun:
    part = x[first:end]
    return SteadyRun(first, end - 1, float(part.min()), float(part.max()), float(expected[first:end].min()))


def _mark(expected: Floats, x: Floats, sd: Floats, step: float, m: int) -> None:
    """Lower `expected` at the results of the windows of m that are told."""
    origin = -(m // 2)  # the window begins at its own index
    low = minimum_filter1d(x, m, origin=origin)[: len(x) - m + 1]
    high = maximum_filter1d(x, m, origin=origin)[: len(x) - m + 1]
    narrow = np.flatnonzero(high - low <= RANGE * sd[: len(low)] + step)
    ranked = np.sort(x)
    q = (np.searchsorted(ranked, high[narrow], "right") - np.searchsorted(ranked, low[narrow], "left")) / len(x)
    chance = m * q ** (m - 1) - (m - 1) * q**m
    told = chance * len(low) * len(WINDOWS) < EXPECTED
    for start, value in zip(narrow[told].tolist(), (chance * len(low) * len(WINDOWS))[told].tolist(), strict=True):
        expected[start : start + m] = np.minimum(expected[start : start + m], value)
