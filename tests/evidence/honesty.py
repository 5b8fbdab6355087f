"""Limits learned from few episodes, on days that taught them nothing: are there as many alarms as the budget allows, as the plan predicts?

A hundred fault-free streams each give the same fixed candidate its limits, by the day-block bootstrap, and are then followed further.
"""

import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter

from pbm.methods.alarm import episodes
from pbm.methods.chain import tracker_for
from pbm.methods.intervals import binomial_interval
from pbm.methods.jit import Floats
from pbm.methods.limits import calibrated_limits
from pbm.methods.seeds import child

SEEDS = range(100)
BUDGET = 1 / 30  # alarms a day
Draw = Callable[[int, int, np.random.Generator], Floats]


def normal(days: int, per_day: int, random: np.random.Generator) -> Floats:
    """Independent standard normal results."""
    return random.standard_normal(days * per_day)


def rounded(days: int, per_day: int, random: np.random.Generator) -> Floats:
    """Normal results with an SD of three reported steps, such as sodium in whole mmol/L."""
    return np.rint(random.normal(140, 3, days * per_day))


def skewed(days: int, per_day: int, random: np.random.Generator) -> Floats:
    """Lognormal results, sigma 0.5."""
    return np.exp(0.5 * random.standard_normal(days * per_day))


def correlated(days: int, per_day: int, random: np.random.Generator) -> Floats:
    """Neighbours correlated by 0.3 (first-order autoregression), and a level of its own each day with an SD of 0.1."""
    noise = lfilter([1.0], [1.0, -0.3], random.standard_normal(days * per_day)) * np.sqrt(1 - 0.3**2)
    return np.asarray(noise + np.repeat(random.normal(0, 0.1, days), per_day))


STREAMS: dict[str, Draw] = {
    "normal": normal,
    "lognormal": skewed,
    "rounded": rounded,
    "correlated, day effects": correlated,
}


@dataclass(frozen=True, slots=True)
class Fixed:
    """A candidate that is not chosen but given: statistic, parameter, and the upper side's share of its alarms."""

    title: str
    statistic: str
    parameter: float
    upper: float = 0.5


CANDIDATES = (
    Fixed("EWMA, weight 0.05", "ewma", 0.05),
    Fixed("moving mean of 20", "mean", 20),
    Fixed("CUSUM, reference 0.5", "cusum", 0.5),
    Fixed("moving SD of 40, upper side only", "sd", 40, 1.0),
)


@dataclass(frozen=True, slots=True)
class History:
    """Training days, days after them, results a day, and pseudo-histories of the bootstrap."""

    training: int
    later: int
    per_day: int
    draws: int


AS_IN_A_PLAN = History(240, 120, 100, 200)


@dataclass(frozen=True, slots=True)
class Held:
    """Over all seeds: later alarms, what the budget allows of them, and whether their number lay inside the predicted interval."""

    alarms: Floats
    allowed: float
    inside: np.ndarray

    @property
    def rate(self) -> float:
        """Mean rate of later alarms, as a multiple of the budget."""
        return float(self.alarms.mean() / self.allowed)

    @property
    def error(self) -> float:
        """Its standard error."""
        return float(self.alarms.std(ddof=1) / np.sqrt(len(self.alarms)) / self.allowed)

    @property
    def share_inside(self) -> float:
        """Share of seeds inside the predicted interval."""
        return float(self.inside.mean())


def held(candidate: Fixed, stream: str, history: History = AS_IN_A_PLAN) -> Held:
    """A candidate on every seed of a stream."""
    found = [_one(candidate, stream, history, seed) for seed in SEEDS]
    alarms, inside = zip(*found, strict=True)
    return Held(np.array(alarms, dtype=float), BUDGET * history.later, np.array(inside))


def _one(candidate: Fixed, stream: str, history: History, seed: int) -> tuple[int, bool]:
    random = child(seed, "honesty", stream, candidate.title)
    z = STREAMS[stream](history.training + history.later, history.per_day, random)
    at = history.training * history.per_day
    days = np.arange(history.training + 1) * history.per_day
    tracker = tracker_for(z[:at], candidate.statistic, candidate.parameter)
    found = calibrated_limits(tracker, z[:at], days, BUDGET * history.training, random, history.draws, candidate.upper)
    if found is None:
        raise ValueError(f"{candidate.title} on {stream}: no tail")
    alarms = int((episodes(tracker.path(z), found.limits).at >= at).sum())
    low, high = found.predicted(history.later / history.training)
    return alarms, low <= alarms <= high


def lines() -> Iterator[str]:
    """The section."""
    h, n, every = AS_IN_A_PLAN, len(SEEDS), 1 / BUDGET
    early, later = BUDGET * h.training, BUDGET * h.later
    yield from f"""
{n} fault-free streams of {h.training + h.later} days with {h.per_day} results a day; one alarm in {every:g} days allowed. Centre and
limits are learned on the first {h.training} days ({early:g} alarms allowed), by the bootstrap over days with {h.draws} pseudo-histories,
as `pbm tune` does; the last {h.later} days are counted ({later:g} allowed) and compared with the 90 % interval that the plan states as
`held_out.predicted`. A count is a whole number, and an interval of whole numbers holds at least 90 %, mostly more. Asked for: a mean rate
between 0.7 and 1.25 of the budget, and about 90 % of streams inside. In brackets: standard error; exact 90 % interval.
""".strip().splitlines()
    yield ""
    yield "| stream | candidate | mean rate of later alarms to the budget | streams inside the predicted interval |"
    yield "|---|---|---|---|"
    for stream in STREAMS:
        for candidate in CANDIDATES:
            found = held(candidate, stream)
            low, high = binomial_interval(int(found.inside.sum()), len(found.inside))
            inside = f"{found.share_inside:.0%} ({low:.0%} to {high:.0%})"
            yield f"| {stream} | {candidate.title} | {found.rate:.2f} ({found.error:.2f}) | {inside} |"


if __name__ == "__main__":
    sys.stdout.write("\n".join(lines()) + "\n")
