"""The table of statistics: name, parameter, what each looks for, and its start and step."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

from pbm.methods import ewma, moving_mean, moving_median
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
    parameter
        "window" (number of values) or "weight" (of the newest value).
    looks_for
        What error moves it.
    start, step
        The law.
    starts_at_centre
        Whether its first state holds the centre (so that it is judged from the first value on).
    """

    name: str
    title: str
    parameter: Literal["window", "weight"]
    looks_for: str
    start: Callable[[Parameters, float], list[float]]
    step: Step
    starts_at_centre: bool


STATISTICS = {
    s.name: s
    for s in (
        Statistic("mean", "moving mean", "window", "shift", moving_mean.start, moving_mean.step, False),
        Statistic(
            "median", "moving median", "window", "shift, heavy tails", moving_median.start, moving_median.step, False
        ),
        Statistic("ewma", "EWMA", "weight", "shift, drift", ewma.start, ewma.step, True),
    )
}
