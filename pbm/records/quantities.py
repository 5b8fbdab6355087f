"""Quantities that people write in words: "1 per 30 days", "10 results", "5 min"; and limits that are absolute, relative or both."""

import re
from dataclasses import dataclass
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, model_validator

_RATE = re.compile(r"^\s*(\d+(?:\.\d+)?)\s+per\s+(\d+(?:\.\d+)?)?\s*days?\s*$")
_COUNT = re.compile(r"^\s*(\d+)\s+results?\s*$")
_MINUTES = re.compile(r"^\s*(\d+(?:\.\d+)?)\s*min(?:utes?)?\s*$")
_CLOCK = re.compile(r"^([01]\d|2[0-3]):([0-5]\d)$")


class Written(BaseModel):
    """Base of everything a person writes: frozen, and an unknown key is a mistake."""

    model_config = ConfigDict(frozen=True, extra="forbid")


@dataclass(frozen=True, slots=True)
class Rate:
    """A number of alarms in a number of days."""

    count: float
    days: float

    @property
    def per_day(self) -> float:
        """Alarms a day."""
        return self.count / self.days

    def __str__(self) -> str:
        return f"{self.count:g} per {self.days:g} days"


@dataclass(frozen=True, slots=True)
class Lag:
    """What is still reported between an alarm and the stop: a number of results, or minutes."""

    results: int = 0
    minutes: float = 0.0

    def __str__(self) -> str:
        return f"{self.minutes:g} min" if self.minutes else f"{self.results} results"


def _rate(given: Any) -> Any:
    if isinstance(given, Rate):
        return given
    found = _RATE.match(given) if isinstance(given, str) else None
    if not found or float(found[1]) <= 0 or float(found[2] or 1) <= 0:
        raise ValueError('expected a rate such as "1 per 30 days"')
    return Rate(float(found[1]), float(found[2] or 1))


def _lag(given: Any) -> Any:
    if isinstance(given, Lag):
        return given
    text = given if isinstance(given, str) else ""
    if found := _COUNT.match(text):
        return Lag(results=int(found[1]))
    if found := _MINUTES.match(text):
        return Lag(minutes=float(found[1]))
    raise ValueError('expected a number of results or minutes such as "10 results" or "5 min"')


def _every(given: Any) -> Any:
    found = _COUNT.match(given) if isinstance(given, str) else None
    count = int(found[1]) if found else given
    if not isinstance(count, int) or isinstance(count, bool) or count < 1:
        raise ValueError('expected a count of results such as "200 results"')
    return count


def _clock(given: str) -> str:
    if not _CLOCK.match(given):
        raise ValueError('expected a clock time such as "06:00"')
    return given


AlarmRate = Annotated[Rate, BeforeValidator(_rate)]
ResponseLag = Annotated[Lag, BeforeValidator(_lag)]
EveryResults = Annotated[int, BeforeValidator(_every)]
ClockTime = Annotated[str, AfterValidator(_clock)]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
NotNegative = Annotated[float, Field(ge=0, allow_inf_nan=False)]
Finite = Annotated[float, Field(allow_inf_nan=False)]
Signs = Literal["both", "up", "down"]


class AllowableError(Written):
    """TEa: absolute, a percentage of the result, or both, when the greater counts.

    Attributes
    ----------
    absolute
        In the unit of the analyte.
    percent
        Of the result.
    """

    absolute: Positive | None = None
    percent: Positive | None = None

    @model_validator(mode="after")
    def _one_is_given(self) -> "AllowableError":
        if self.absolute is None and self.percent is None:
            raise ValueError("expected { absolute = ... }, { percent = ... } or both")
        return self

    def in_words(self, unit: str) -> str:
        """As people read it, such as "15 % or 6 U/L, the greater"."""
        percent = "" if self.percent is None else f"{self.percent:g} %"
        absolute = "" if self.absolute is None else f"{self.absolute:g} {unit}"
        return f"{percent} or {absolute}, the greater" if absolute and percent else absolute or percent


class AnalyticSd(Written):
    """Analytic SD at a result x: sqrt(absolute^2 + (cv x)^2).

    Attributes
    ----------
    absolute
        Part that does not depend on the result, in the unit of the analyte.
    cv_percent
        Part proportional to the result, in percent of it.
    """

    absolute: NotNegative = 0.0
    cv_percent: NotNegative = 0.0

    @model_validator(mode="after")
    def _some_is_given(self) -> "AnalyticSd":
        if self.absolute == 0 and self.cv_percent == 0:
            raise ValueError("expected { absolute = ... } and/or { cv_percent = ... }, not both zero")
        return self
