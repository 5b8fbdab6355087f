"""Run lengths of the tool's own monitor on seeded standard normal values, with the standard error of their mean."""

from functools import cache
from typing import NamedTuple

import numpy as np

from pbm.methods.chain import Preparation, Tracker
from pbm.methods.jit import Floats, Integers
from pbm.methods.seeds import child

SHARP = 3.5
WHOLE = 20_000_000
HISTORY = 5_000_000


class Mean(NamedTuple):
    """A mean and its standard error."""

    value: float
    error: float


@cache
def _normals(name: str, count: int) -> Floats:
    return child(20, "published", name).standard_normal(count)


@cache
def _bench() -> Floats:
    """Memory that is written over again and again: touching new pages costs more than the simulation."""
    return np.empty(WHOLE)


def shifted(shift: float, count: int) -> Floats:
    """Standard normal values, always the same, plus a shift. The next call writes over them."""
    return np.add(_normals("zero state", WHOLE)[:count], shift, out=_bench()[:count])


def mean(lengths: Integers | Floats) -> Mean:
    """Mean of run lengths or of other independent figures."""
    return Mean(float(lengths.mean()), float(lengths.std() / np.sqrt(len(lengths))))


def run_lengths(tracker: Tracker, z: Floats, limit: float) -> Integers:
    """Lengths, in offered values, of runs begun afresh one after the other; the limits lie at +-limit."""
    return np.diff(tracker.run_ends(z, -limit, limit), prepend=-1)


def average_run_length(tracker: Tracker, shift: float, limit: float, count: int) -> Mean:
    """Zero-state average run length over `count` values: the shift is there from the first value on."""
    return mean(run_lengths(tracker, shifted(shift, count), limit))


@cache
def onsets(tracker: Tracker, limit: float, calm: int) -> Floats:
    """States of an in-control stream every 50 values, where the last `calm` values before raised no alarm; shape (r, s)."""
    z = _normals("history", HISTORY)
    at = np.arange(1000, HISTORY, 50)
    outside = np.append(0, np.cumsum(np.abs(tracker.path(z)) > limit))
    return tracker.states_at(z, at[outside[at] == outside[at - calm]])


def delay(tracker: Tracker, shift: float, limit: float, expected: float, calm: int = 0) -> Mean:
    """Average run length from an onset in mid-stream: the statistic's state is that of an in-control stream.

    Parameters
    ----------
    expected
        About what will come out: onsets lie four times as far apart, so that their runs hardly overlap.
    calm
        Values before the onset without an alarm; 0 to take the state as it comes.
    """
    gap = 4 * int(np.ceil(expected))
    states = onsets(tracker, limit, calm)
    states = states[: WHOLE // gap - 20]
    starts = np.arange(len(states)) * gap
    after = shifted(shift, int(starts[-1]) + 20 * gap)
    found = tracker.first_crossings(after, states, starts, np.full(len(starts), len(after)), -limit, limit)
    assert (found >= 0).all()
    return mean(found - starts + 1)


def weighted_grid(mean_: float, sd: float, cuts: tuple[float, ...]) -> tuple[Floats, Floats]:
    """Normal values and their weights: Gauss-Legendre nodes between the cuts, so that no node lies near one."""
    nodes, weights = np.polynomial.legendre.leggauss(40)
    ends = np.unique([*np.linspace(mean_ - 10 * sd, mean_ + 10 * sd, 41), *cuts])
    middle, half = (ends[1:] + ends[:-1]) / 2, np.diff(ends) / 2
    x = (middle[:, None] + half[:, None] * nodes).ravel()
    density = np.exp(-(((x - mean_) / sd) ** 2) / 2) / (sd * np.sqrt(2 * np.pi))
    return x, density * (half[:, None] * weights).ravel()


class Moments(NamedTuple):
    """Share of results admitted, mean and variance of what the statistic takes."""

    share: float
    mean: float
    variance: float


def moments(preparation: Preparation, x: Floats, weight: Floats) -> Moments:
    """Moments of prepared values over a weighted grid of results."""
    z = preparation.all(x, np.zeros(len(x)))
    admitted = ~np.isnan(z)
    share = float(weight[admitted].sum())
    first = float((weight * np.where(admitted, z, 0.0)).sum()) / share
    return Moments(share, first, float((weight * np.where(admitted, (z - first) ** 2, 0.0)).sum()) / share)
