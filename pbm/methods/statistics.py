"""The table of statistics: name, parameters, what each looks for, its start and step, and where its centre lies.

Names of parameters, the same everywhere:

    window      N, number of values (of a batch: its size)
    weight      w, of the newest value
    reference   k, of a CUSUM
    level       in-control mean of the values       (learned from in-control values where not given)
    spread      in-control SD of the values         (learned from in-control values where not given)
    low, high   a value outside [low, high] is counted; infinite where open
    exponent    P, of the batch-weighted mean
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

from pbm.methods import batch_mean, cusum, ewma, ewsd, moving_mean, moving_median, moving_sd, moving_share
from pbm.methods.jit import Parameters, Step


@dataclass(frozen=True, slots=True)
class Statistic:
    """One statistic on the stream of admitted values.

    Attributes
    ----------
    name
        As written in `plan.toml`.
    title
        As people read it.
    parameters
        Names of the numbers that `start` and `step` take as `par`, in that order. The first is the one that is chosen.
    looks_for
        What error moves it.
    start, step
        The law.
    begins
        Where the centre stands before the statistic was seen: at the level or spread of the values, or at zero.
    settles
        Whether the centre is then moved to the mean of the in-control path (or stays where it began).
    most_uneven
        How many times as far from the centre as the other one limit may lie.
    """

    name: str
    title: str
    parameters: tuple[str, ...]
    looks_for: str
    start: Callable[[Parameters, float], list[float]]
    step: Step
    begins: Literal["level", "spread", "zero"]
    settles: bool
    most_uneven: float = math.inf

    @property
    def parameter(self) -> str:
        """The parameter that is chosen: "window", "weight" or "reference"."""
        return self.parameters[0]

    @property
    def starts_at_centre(self) -> bool:
        """Whether its first state stands at the centre, so that it is judged from the first value on (else after a window)."""
        return "window" not in self.parameters


# fmt: off
STATISTICS = {
    s.name: s
    for s in (
        Statistic("mean", "moving mean", ("window",), "shift",
                  moving_mean.start, moving_mean.step, "level", True),
        Statistic("median", "moving median", ("window",), "shift, heavy tails",
                  moving_median.start, moving_median.step, "level", True),
        Statistic("sd", "moving SD", ("window",), "imprecision",
                  moving_sd.start, moving_sd.step, "spread", True),
        Statistic("ewma", "EWMA", ("weight",), "shift, drift",
                  ewma.start, ewma.step, "level", False),
        Statistic("ewsd", "exponentially weighted SD", ("weight", "level"), "imprecision",
                  ewsd.start, ewsd.step, "spread", True),
        Statistic("share", "moving share", ("window", "low", "high"), "shift seen in the tails",
                  moving_share.start, moving_share.step, "zero", True),
        Statistic("cusum", "CUSUM", ("reference", "level", "spread"), "small sustained shift",
                  cusum.start, cusum.step, "zero", False, most_uneven=cusum.MOST_UNEVEN),
        Statistic("batch", "batch-weighted mean", ("window", "exponent"), "shift of indices such as MCV",
                  batch_mean.start, batch_mean.step, "level", True),
    )
}
# fmt: on
