"""Repeats of one patient: how much of a stream is a patient who was there before, within a day, within a week, at any time."""

from dataclasses import dataclass

import numpy as np

from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.jit import Floats, Integers


@dataclass(frozen=True, slots=True)
class Repeats:
    """Repeats among the results that name their patient.

    Attributes
    ----------
    known
        Results that name their patient.
    within_day, within_week, ever
        Share of them that follow an earlier result of the same patient within a day, within a week, at any time.
    most
        Results of the patient who has the most.
    most_spread
        Their SD, in the result's unit.
    """

    known: int
    within_day: float
    within_week: float
    ever: float
    most: int
    most_spread: float


def count_repeats(time: Integers, patient: Integers, x: Floats) -> Repeats:
    """Repeats in a stream.

    Parameters
    ----------
    time : (n,)
        UTC microseconds, not decreasing, at least one.
    patient : (n,)
        A number for each patient, at least 0.
    x : (n,)
        Results.
    """
    order = np.argsort(patient, kind="stable")
    same = np.diff(patient[order]) == 0
    since = np.diff(time[order])
    count = np.bincount(patient)
    most = x[patient == int(np.argmax(count))]
    n = len(time)
    return Repeats(
        n,
        float((same & (since <= MICROSECONDS_PER_DAY)).sum()) / n,
        float((same & (since <= 7 * MICROSECONDS_PER_DAY)).sum()) / n,
        float(same.sum()) / n,
        len(most),
        float(most.std(ddof=1)) if len(most) > 1 else 0.0,
    )
