"""One tracker or more for every statistic of the table, and the seeded streams they are run on."""

import math

import numpy as np

from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats

LEVEL, SPREAD = 140.0, 3.0

TRACKERS = {
    "mean of 2": Tracker("mean", 2, LEVEL),
    "mean of 20": Tracker("mean", 20, LEVEL),
    "median of 2": Tracker("median", 2, LEVEL),
    "median of 9": Tracker("median", 9, LEVEL),
    "median of 20": Tracker("median", 20, LEVEL),
    "SD of 2": Tracker("sd", 2, 1.7),
    "SD of 20": Tracker("sd", 20, SPREAD),
    "EWMA .05": Tracker("ewma", 0.05, LEVEL),
    "EWMA 1": Tracker("ewma", 1.0, LEVEL),
    "EWSD .05": Tracker("ewsd", 0.05, SPREAD, (LEVEL,)),
    "EWSD 1": Tracker("ewsd", 1.0, SPREAD, (LEVEL,)),
    "share of 20": Tracker("share", 20, 0.1, (135.0, 145.0)),
    "share of 7 above": Tracker("share", 7, 0.1, (-np.inf, 145.0)),
    "CUSUM .5": Tracker("cusum", 0.5, 0.0, (LEVEL, SPREAD)),
    "CUSUM 0": Tracker("cusum", 0.0, 0.0, (LEVEL, SPREAD)),
    "batch of 20, 1/2": Tracker("batch", 20, LEVEL, (0.5,)),
    "batch of 5, .66": Tracker("batch", 5, LEVEL, (0.66,)),
    "batch of 7, 1": Tracker("batch", 7, LEVEL, (1.0,)),
}


def stream(seed: int, count: int, dropped: float = 0.0, step: float = 0.0) -> Floats:
    """Normal values about the level, some dropped (not a number), rounded to a step if one is given."""
    random = np.random.default_rng(seed)
    z = random.normal(LEVEL, SPREAD, count)
    z = np.round(z / step) * step if step else z
    z[random.random(count) < dropped] = np.nan
    return z


def admitted(z: Floats) -> Floats:
    """The values that were not dropped."""
    return z[~np.isnan(z)]


def live(tracker: Tracker, z: Floats, state: list[float] | None = None) -> tuple[Floats, list[float]]:
    """The statistic after each value, stepped in plain Python on a list, and the state after the last."""
    state = tracker.start() if state is None else state
    out = [tracker.law.step(state, x, tracker.par) if not math.isnan(x) else np.nan for x in z.tolist()]
    return np.array(out), state


def same_bits(a: Floats, b: Floats) -> bool:
    """Equal to the last bit, signs of zeros included; not a number equals not a number."""
    gaps = np.isnan(a)
    return bool(np.array_equal(gaps, np.isnan(b))) and a[~gaps].tobytes() == b[~gaps].tobytes()
