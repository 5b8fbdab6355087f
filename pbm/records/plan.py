"""`plan.toml`: what each stream's monitor is, its limits, and where they came from."""

from datetime import date, datetime
from typing import Annotated, Literal

from pydantic import Field, model_validator

from pbm.records.quantities import Finite, NotNegative, Positive, Written

StatisticName = Literal["mean", "median", "ewma", "sd", "ewsd", "share", "cusum", "batch"]
Verdict = Literal["useful", "marginal", "not useful here"]
Interval = tuple[Finite, Finite]


class HistoryMark(Written):
    """Which history a plan was made from."""

    first: datetime
    last: datetime
    rows: int
    sha256: str


class Made(Written):
    """By what, when, from what, and with which seed a plan was made."""

    by: str
    at: datetime
    history: HistoryMark
    seed: int
    lab_sha256: str
    versions: dict[str, str] = Field(default_factory=dict)


class Admit(Written):
    """Truncation limits in the result's own unit (an open side is left out) and what happens beyond them."""

    low: Finite | None = None
    high: Finite | None = None
    mode: Literal["truncate", "winsorize"] = "truncate"

    @model_validator(mode="after")
    def _in_order(self) -> "Admit":
        if self.low is not None and self.high is not None and self.low >= self.high:
            raise ValueError("expected low below high")
        return self


class ControlLimits(Written):
    """Control limits on the statistic, on its own (transformed) scale."""

    low: Finite
    high: Finite


class LimitsInterval(Written):
    """90 % intervals of the limits from the day-block bootstrap."""

    low: Interval
    high: Interval


class Training(Written):
    """Days and alarms of the training history at the chosen limits."""

    days: int
    episodes: int


class HeldOut(Written):
    """Days and alarms of the held-out history, the 90 % interval of the expected count, and whether the budget was kept."""

    days: int
    episodes: int
    interval: Interval
    kept: bool


class BaselinePlan(Written):
    """Patient mix: effect of each ward, and of each of the 168 hours of the week from Monday 00:00, on the transformed scale."""

    wards: dict[str, Finite]
    hours: Annotated[tuple[Finite, ...], Field(min_length=168, max_length=168)]


class Outside(Written):
    """A value below `low` or above `high` is counted by a moving share; on the statistic's (transformed) scale, one side may be open."""

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

    `centre` is the in-control level of the statistic, `level` that of the values it takes (the centre, if left out); `spread` is the
    in-control SD of the values.
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
    train: Training | None = None
    held_out: HeldOut | None = None

    @model_validator(mode="after")
    def _whole(self) -> "MonitorPlan":
        if not self.limits.low < self.centre < self.limits.high:
            raise ValueError("expected limits.low < centre < limits.high")
        if (self.transform == "boxcox") != (self.transform_lambda is not None):
            raise ValueError('transform_lambda goes with transform = "boxcox" and only with it')
        needed = PARAMETER_KEYS[self.statistic]
        given = [key for key in _OPTIONAL_KEYS if getattr(self, key) is not None]
        if not set(needed) <= set(given) <= {*needed, "level"}:
            found = " and ".join(given) or "neither"
            raise ValueError(f"statistic {self.statistic} takes {' and '.join(needed)}, found {found}")
        return self


class StreamPlan(Written):
    """What was decided for one stream: its monitors, or the reason why it has none; the days from `held_out_from` on did not train it."""

    unit: str
    verdict: Verdict
    reason: str
    results_per_day: NotNegative
    held_out_from: date | None = None
    monitors: tuple[MonitorPlan, ...] = ()


class Plan(Written):
    """All of `plan.toml`."""

    made: Made
    streams: dict[str, StreamPlan]
