"""Day, night and weekend of the laboratory's clocks: when an error begins decides how soon patients show it.

    day       Monday to Friday, 07:00 to 19:00
    night     Monday to Friday, the other hours of those days
    weekend   Saturday and Sunday, all hours

Public holidays are not known and count as what they fall on.
"""

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY, MICROSECONDS_PER_HOUR
from pbm.methods.day_bootstrap import Mask, on_weekend
from pbm.methods.jit import Integers

FIRST_HOUR, LAST_HOUR, HOURS_A_DAY = 7, 19, 24
PARTS = {
    "day": f"Monday to Friday, {FIRST_HOUR:02}:00 to {LAST_HOUR}:00",
    "night": "Monday to Friday, the other hours of those days",
    "weekend": "Saturday and Sunday, all hours",
}


def parts_of_week(local: Integers) -> dict[str, Mask]:
    """Which results belong to each part, each shape (n,).

    Parameters
    ----------
    local : (n,)
        What the wall clock showed, microseconds since 1970-01-01 00:00.

    Examples
    --------
    >>> friday_noon, friday_late, sunday = 1.5 * 86_400e6, 1.9 * 86_400e6, 3.5 * 86_400e6
    >>> parts = parts_of_week(np.array([friday_noon, friday_late, sunday]).astype(np.int64))
    >>> {part: which.tolist() for part, which in parts.items()}
    {'day': [True, False, False], 'night': [False, True, False], 'weekend': [False, False, True]}
    """
    weekend = on_weekend(local // MICROSECONDS_PER_DAY)
    hour = local % MICROSECONDS_PER_DAY // MICROSECONDS_PER_HOUR
    by_day = (hour >= FIRST_HOUR) & (hour < LAST_HOUR)
    return {"day": by_day & ~weekend, "night": ~by_day & ~weekend, "weekend": weekend}


def hours_of_parts(first_day: int, last_day: int) -> dict[str, float]:
    """Hours of each part in whole local days, the first to the last, counted from 1970-01-01."""
    weekend = on_weekend(np.arange(first_day, last_day + 1))
    working, free = int((~weekend).sum()), int(weekend.sum())
    by_day = LAST_HOUR - FIRST_HOUR
    return {
        "day": float(working * by_day),
        "night": float(working * (HOURS_A_DAY - by_day)),
        "weekend": float(free * HOURS_A_DAY),
    }
