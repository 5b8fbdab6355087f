"""What an alarm says about its error: since when, how large, how many results are expected to be unreliable.

The onset is the most likely step among the admitted values (methods/onset.py). Its size is brought back to the result's unit around the
centre, T^-1(centre + shift) - T^-1(centre), and kept inside the results seen, beyond which a transform may run to infinity. Every result
offered since, admitted or not, then has the chance p(x, f) under a shift of as many TEa.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from pbm.methods.chain import Preparation
from pbm.methods.onset import InControl, find_onset
from pbm.methods.unreliable import ErrorModel, chance_unreliable
from pbm.records.alarm import OnsetEstimate
from pbm.records.result import Result

WINDOW = 1_000  # results offered, the most from which an onset is estimated
# Statistics that leave their limits on the side to which results have moved; an SD or a share outside does not tell it.
TELL_THE_SIDE = ("mean", "median", "ewma", "cusum", "batch")


class Offered(NamedTuple):
    """A result and the value it gave the statistic; not a number if it was dropped."""

    result: Result
    z: float


@dataclass(frozen=True, slots=True)
class Estimator:
    """In-control behaviour of a monitor's values, the way back to the result's unit, and the analyte's errors."""

    in_control: InControl
    preparation: Preparation
    error: ErrorModel

    def estimate(self, recent: Sequence[Offered], side: int) -> OnsetEstimate:
        """Onset and size of the error behind an alarm.

        Parameters
        ----------
        recent
            The last results offered to the monitor, in order; the last one raised the alarm (and was admitted).
        side
            +1 or -1.
        """
        admitted = [place for place, offered in enumerate(recent) if not math.isnan(offered.z)]
        onset = find_onset(np.array([recent[place].z for place in admitted]), self.in_control, side)
        since = [offered.result for offered in recent[admitted[onset.start] :]]
        size = self._in_unit(onset.shift, [recent[place].result.value for place in admitted])
        tea = self._tea_at_centre()
        size_in_tea = size / tea if tea > 0 else math.copysign(math.inf, size)
        return OnsetEstimate(
            onset=since[0].time,
            onset_low=recent[admitted[onset.earliest]].result.time,
            onset_high=recent[admitted[onset.latest]].result.time,
            results=len(since),
            size=size,
            size_in_tea=size_in_tea,
            expected_unreliable=self._expected(np.array([result.value for result in since]), size_in_tea),
        )

    def _in_unit(self, shift: float, seen: list[float]) -> float:
        level = self.preparation.back(self.in_control.centre + shift)
        return min(max(level, min(seen)), max(seen)) - self.preparation.back(self.in_control.centre)

    def _tea_at_centre(self) -> float:
        return float(self.error.tea(np.array(self.preparation.back(self.in_control.centre))))

    def _expected(self, x: np.ndarray[tuple[int], np.dtype[np.float64]], size_in_tea: float) -> float:
        x = x[np.isfinite(x)]
        tea = self.error.tea(x)
        return float(chance_unreliable(tea, size_in_tea * tea, self.error.sd(x)).sum())
