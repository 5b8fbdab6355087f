"""What a search found beside the plan: scores of everything tried, runners-up, and what each truncation keeps and loses.

This is also the content of `reports/tuning.json`; `version` rises when its shape changes. A score is the expected number of unreliable
results of an error with the control schedule present, averaged over the errors of `lab.toml` with their weights. Scores compare choices on
the training days; what a monitor is worth is told by the appraisal, on days that chose nothing.
"""

from datetime import datetime
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

from pbm.records.plan import StreamPlan


class Tried(BaseModel):
    """Base of everything told of a search: frozen, and every number finite, since JSON has no other."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


class Truncation(Tried):
    """Truncation limits that were tried.

    Attributes
    ----------
    low, high
        In the result's own unit; none where a side is open.
    mode
        "truncate" drops a result outside, "winsorize" sets it to the nearer limit.
    transform
        What is done to an admitted result.
    keeps
        Share of the training results that are admitted.
    moves
        How far the mean of admitted results moves for a unit of true shift, on the statistic's scale; 1 loses nothing.
    """

    low: float | None
    high: float | None
    mode: Literal["truncate", "winsorize"]
    transform: Literal["none", "log", "boxcox"]
    keeps: float
    moves: float


class Surface(Tried):
    """First-round scores of one statistic, truncation by truncation and parameter by parameter.

    Attributes
    ----------
    statistic, more
        The statistic, and its other parameter in words where it has one.
    parameter
        Which parameter the columns vary: weight, window or reference.
    columns
        Its values.
    rows
        Places of the truncations in `StreamTuning.truncations`.
    scores
        By row and column; none where the choice could not be limited.
    """

    statistic: str
    more: str
    parameter: str
    columns: tuple[float, ...]
    rows: tuple[int, ...]
    scores: tuple[tuple[float | None, ...], ...]


class RunnerUp(Tried):
    """The best choice of one family of statistics in the last round.

    Attributes
    ----------
    words
        The monitor in words.
    score, error
        Its score, and the standard error of the difference from the chosen one.
    costs
        By how much its score is above that of the chosen monitor, as a share of the latter.
    """

    words: str
    score: float
    error: float
    costs: float


class Search(Tried):
    """One monitor's search.

    Attributes
    ----------
    watches
        What the monitor is meant to find.
    candidates
        Choices with limits in the first round.
    rounds
        Of each round: choices compared, and onsets of each error.
    chosen, score
        The chosen monitor in words, and its score.
    schedule_alone
        The same score without any monitor.
    runners_up
        The best of each other family, the nearest first.
    surfaces
        First-round scores, one for each statistic and second parameter.
    """

    watches: Literal["shift", "imprecision"]
    candidates: int
    rounds: tuple[tuple[int, int], ...]
    chosen: str
    score: float
    schedule_alone: float
    runners_up: tuple[RunnerUp, ...]
    surfaces: tuple[Surface, ...]


class StreamTuning(Tried):
    """Why a stream's monitors are what they are.

    Attributes
    ----------
    unit
        Of the stream.
    truncations
        Every truncation and transform that was tried.
    searches
        One for each kind of monitor that was looked for.
    together
        In words, why there is a second monitor or none; empty where only one kind was looked for.
    """

    unit: str
    truncations: tuple[Truncation, ...]
    searches: tuple[Search, ...]
    together: str


class Tuned(Tried):
    """What tune gives for a stream: its plan and, where there was a search, the reasons."""

    plan: StreamPlan
    reasons: StreamTuning | None = None


class Tuning(Tried):
    """All of `reports/tuning.json`.

    Attributes
    ----------
    version
        Of this shape.
    at
        When it was written.
    streams
        By name such as sodium@line-2.
    """

    version: Literal[1] = 1
    at: datetime
    streams: Annotated[dict[str, StreamTuning], Field(default_factory=dict)]
