"""A stretch of invented results of one stream, with gaps in time, two wards, censored results, and what belongs to it."""

import math
from typing import Any

import numpy as np

from pbm.methods.baseline import Mix
from pbm.methods.expected import Onsets, follow
from pbm.methods.faults import Chance, Reporting
from pbm.methods.reported_step import multiples
from pbm.methods.seeds import child
from pbm.methods.trials import Stretch
from pbm.methods.unreliable import ErrorModel

MINUTE = 60_000_000
ERROR = ErrorModel(tea_absolute=0.3, tea_percent=5.0, sd_absolute=0.03, cv_percent=0.8)


def stretch(count: int = 3000, seed: int = 1, **given: Any) -> Stretch:
    """Potassium-like results in steps of 0.1, about one a minute."""
    random = child(seed, "stretch", count)
    value = multiples(np.rint(random.normal(42, 5, count)), 0.1).clip(2.5, 6.5)
    time = np.cumsum(random.integers(0, 3 * MINUTE, count))
    censor = np.where(value <= 2.5, -1.0, np.where(value >= 6.5, 1.0, 0.0))
    mix = Mix(("A", "B"), random.integers(0, 2, count), (time // (60 * MINUTE)) % 168)
    made = {"error": ERROR, "reporting": Reporting(0.1, 2.5, 6.5), "chance": Chance.draw(count, random)} | given
    return Stretch(time, value, censor, mix, made["error"], made["reporting"], made["chance"])


def onsets(of: Stretch, at: list[int], length: int = 400, every: int = 120) -> Onsets:
    """Onsets followed for so many results, with a control event after every so many results of the stretch."""
    places = np.array(at, dtype=np.int64)
    end = np.minimum(places + length, len(of))
    return follow(places, end, np.arange(every, len(of), every), math.ceil(length / every))
