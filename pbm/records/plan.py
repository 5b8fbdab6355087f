"""`plan.toml`: what each stream's monitor is, its limits, and where they came from."""

import math
from datetime import date, datetime
from typing import Annotated, Literal

from pydantic import Field, model_validator

from pbm.records.quantities import Finite, NotNegative, Positive, Written
from pbm.records.rhythm import Rhythm
from pbm.records.sex_and_age import AGE_BANDS, SEXES

StatisticName = Literal["mean", "median", "ewma", "sd", "ewsd", "share", "cusum", "batch"]
Verdict = Literal["useful", "marginal", "not useful here"]
Interval = tuple[Finite, Finite]


class HistoryMark(Written):
    """Which history a plan was made from.

    Attributes
    ----------
    first, last
        First and last result.
    rows
        Results.
    sha256
        Of the results themselves, whichever files they came in.
    """

    first: datetime
    last: datetime
    rows: int
    sha256: str


class Made(Written):
    """By what, when, from what, and with which seed a plan was made.

    Attributes
    ----------
    by
        Version of the tool.
    at
        When.
    history
        The history.
    seed
        Master seed.
    lab_sha256
        SHA-256 of `lab.toml`.
    versions
        Of Python and of the libraries that decide figures.
    """

    by: str
    at: datetime
    history: HistoryMark
    seed: int
    lab_sha256: str
    versions: dict[str, str] = Field(default_factory=dict)


class Admit(Written):
    """Truncation limits and what happens beyond them.

    Attributes
    ----------
    low, high
        In the result's own unit; an open side is left out.
    mode
        "truncate" drops a result outside, "winsorize" sets it to the nearer limit.
    """

    low: Finite | None = None
    high: Finite | None = None
    mode: Literal["truncate", "winsorize"] = "truncate"

    @model_validator(mode="after")
    def _in_order(self) -> "Admit":
        if self.low is not None and self.high is not None and self.low >= self.high:
            raise ValueError("expected low below high")
        return self


class ControlLimits(Written):
    """Control limits of the statistic.

    Attributes
    ----------
    low, high
        On the statistic's own (transformed) scale; a side that raises no alarm is left out.
    """

    low: Finite | None = None
    high: Finite | None = None

    @model_validator(mode="after")
    def _some_is_given(self) -> "ControlLimits":
        if self.low is None and self.high is None:
            raise ValueError("expected { low = ... }, { high = ... } or both")
        return self

    @property
    def ends(self) -> tuple[float, float]:
        """Both limits; infinite where a side raises no alarm."""
        return -math.inf if self.low is None else self.low, math.inf if self.high is None else self.high


class LimitsInterval(Written):
    """Uncertainty of the limits.

    Attributes
    ----------
    low, high
        90 % interval of each limit from the day-block bootstrap; left out where there is no limit.
    """

    low: Interval | None = None
    high: Interval | None = None


class Training(Written):
    """Alarms of the training days at the chosen limits.

    Attributes
    ----------
    days, episodes
        Calendar days, and alarms in them.
    """

    days: int
    episodes: int


class HeldOut(Written):
    """Alarms of the held-out days, which no choice has seen.

    Attributes
    ----------
    days, episodes
        Calendar days, and alarms in them.
    interval
        Exact 90 % Poisson interval of the expected count.
    kept
        The budget lies inside the interval or the count is below it.
    predicted
        Between which counts the training days expected the alarms of these days, with 90 %, the uncertainty of the limits included.
    """

    days: int
    episodes: int
    interval: Interval
    kept: bool
    predicted: tuple[int, int] | None = None


class BaselinePlan(Written):
    """Patient mix: what is taken from each result before the statistic, on the transformed scale.

    Attributes
    ----------
    wards
        Effect of each ward; a ward that is not listed has effect 0.
    hours
        Effect of each of the 168 hours of the week, from Monday 00:00.
    sexes
        Effect of `F`, `M` and, where the sex is not known, `""`; absent where sex takes no part.
    ages
        Effect of each age band, and of `""` where the age is not known; absent where age takes no part. The bands are `under 1`, `1-11`,
        `12-17`, `18-39`, `40-59`, `60-74`, `75 and over`.
    """

    wards: dict[str, Finite]
    hours: Annotated[tuple[Finite, ...], Field(min_length=168, max_length=168)]
    sexes: dict[str, Finite] | None = None
    ages: dict[str, Finite] | None = None

    @model_validator(mode="after")
    def _only_known_groups(self) -> "BaselinePlan":
        for key, effects, known in (("sexes", self.sexes, SEXES), ("ages", self.ages, AGE_BANDS)):
            for name in effects or ():
                if name not in ("", *known):
                    raise ValueError(f'{key}: "{name}" is none of {", ".join(known)}, nor "" for not known')
        return self


class Outside(Written):
    """Which values a moving share counts.

    Attributes
    ----------
    low, high
        A value below low or above high is counted; on the transformed scale, one side may be open.
    """

    low: Finite | None = None
    high: Finite | None = None

    @model_validator(mode="after")
    def _some_is_given(self) -> "Outside":
        if self.low is None and self.high is None:
            raise ValueError("expected { low = ... }, { high = ... } or both")
        if self.low is not None and self.high is not None and self.low > self.high:
            raise ValueError("expected low not above high")
        return self


# Which keys beside the centre describe each statistic. All need the ones named; the level may be given with any.
PARAMETER_KEYS: dict[StatisticName, tuple[str, ...]] = {
    "mean": ("window",),
    "median": ("window",),
    "ewma": ("weight",),
    "sd": ("window", "level"),
    "ewsd": ("weight", "level"),
    "share": ("window", "outside", "level"),
    "cusum": ("reference", "level"),
    "batch": ("window", "exponent"),
}
_OPTIONAL_KEYS = ("window", "weight", "reference", "outside", "exponent", "level")


class MonitorPlan(Written):
    """One monitor of a stream: from raw result to alarm.

    Attributes
    ----------
    watches
        What it is meant to find.
    admit
        Which results it takes.
    transform
        What is done to an admitted result.
    transform_lambda
        Of Box-Cox, and only with it.
    baseline
        Patient mix, if the monitor is adjusted for it.
    statistic
        Which statistic runs on the prepared values.
    window
        Number N of values of a moving mean, median, SD or share; of a batch its size.
    weight
        Weight w of the newest value, of an exponentially weighted statistic.
    reference
        Reference k of a CUSUM, in SD of one value.
    outside
        What a moving share counts.
    exponent
        Exponent P of a batch-weighted mean.
    level
        In-control mean of the values that the statistic takes; the centre, if left out.
    centre
        In-control level of the statistic.
    limits
        Control limits.
    limits_interval
        Uncertainty of the limits.
    rearm
        An alarm closes when the statistic comes back within this share of the way from the centre to the limit.
    budget_per_day
        False alarms a day for which the limits were chosen.
    spread
        In-control SD of the values.
    slope
        Movement of the mean of admitted values for a unit of true shift.
    inflation
        Variance of a mean of successive values over what independence would give.
    wander
        SD of the slow wandering of the values' level from day to day.
    train
        Alarms on the training days.
    held_out
        Alarms on the held-out days.
    """

    watches: Literal["shift", "imprecision"] = "shift"
    admit: Admit = Admit()
    transform: Literal["none", "log", "boxcox"] = "none"
    transform_lambda: Finite | None = None
    baseline: BaselinePlan | None = None
    statistic: StatisticName
    window: Annotated[int, Field(ge=2, le=5000)] | None = None
    weight: Annotated[float, Field(gt=0, le=1)] | None = None
    reference: NotNegative | None = None
    outside: Outside | None = None
    exponent: Annotated[float, Field(gt=0, le=2)] | None = None
    level: Finite | None = None
    centre: Finite
    limits: ControlLimits
    limits_interval: LimitsInterval | None = None
    rearm: Annotated[float, Field(gt=0, lt=1)] = 0.5
    budget_per_day: Positive
    spread: Positive
    slope: Positive = 1.0
    inflation: Positive = 1.0
    wander: NotNegative = 0.0
    train: Training | None = None
    held_out: HeldOut | None = None

    @model_validator(mode="after")
    def _whole(self) -> "MonitorPlan":
        low, high = self.limits.ends
        if not low < self.centre < high:
            raise ValueError("expected limits.low < centre < limits.high")
        if (self.transform == "boxcox") != (self.transform_lambda is not None):
            raise ValueError('transform_lambda goes with transform = "boxcox" and only with it')
        needed = PARAMETER_KEYS[self.statistic]
        given = [key for key in _OPTIONAL_KEYS if getattr(self, key) is not None]
        if not set(needed) <= set(given) <= {*needed, "level"}:
            found = " and ".join(given) or "neither"
            raise ValueError(f"statistic {self.statistic} takes {' and '.join(needed)}, found {found}")
        return self

    @model_validator(mode="after")
    def _no_hidden_sum(self) -> "MonitorPlan":
        low, high = self.limits.ends
        narrower, wider = sorted((self.centre - low, high - self.centre))
        if self.statistic == "cusum" and wider > 2 * narrower:
            # Only the larger of the two sums is seen: methods/cusum.py says why it can then hide the smaller.
            raise ValueError(
                "expected limits of a cusum of which one is at most twice as far from the centre as the other"
            )
        return self


class StreamPlan(Written):
    """What was decided for one stream: its monitors, or the reason why it has none.

    Attributes
    ----------
    unit
        Of the stream.
    verdict
        Whether a monitor pays here.
    reason
        Why.
    results_per_day
        Results a day in the history.
    held_out_from
        The days from here on did not train the monitor.
    monitors
        The monitors.
    rhythm
        When its results come, and how long a silence raises a notice; without it a silence of the stream is not noticed.
    """

    unit: str
    verdict: Verdict
    reason: str
    results_per_day: NotNegative
    held_out_from: date | None = None
    monitors: tuple[MonitorPlan, ...] = ()
    rhythm: Rhythm | None = None


class Plan(Written):
    """All of `plan.toml`.

    Attributes
    ----------
    made
        Where the plan came from.
    streams
        The streams, by name such as sodium@line-2.
    analysers
        The rhythm of each analyser, all its streams together.
    """

    made: Made
    streams: dict[str, StreamPlan]
    analysers: dict[str, Rhythm] = Field(default_factory=dict)
