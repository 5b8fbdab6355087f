"""Why the monitors are what they are: a stream's search laid out as a grid of truncations, and whether the plan still holds its choice.

Scores are those of the first round on the training days: they compare choices, and say nothing of what a monitor is worth.
"""

from collections.abc import Iterator
from dataclasses import dataclass

from pbm.io.report import words
from pbm.records.appraisal import MonitorAppraisal, StreamAppraisal
from pbm.records.tuning import Search, StreamTuning, Surface, Truncation

_SCALES = {"none": "", "log": ", on the logarithm", "boxcox": ", Box-Cox transformed"}
SCALES = {"none": "as reported", "log": "logarithm", "boxcox": "Box-Cox"}
_PARAMETERS = {"weight": "weight {:g}", "window": "of {:g} results", "reference": "reference {:g} SD"}
_MIX = ", adjusted for patient mix"
_NEAR = (0.02, 0.05, 0.1, 0.2, 0.5)


@dataclass(frozen=True, slots=True)
class GridRow:
    """One truncation: what it keeps, how much of a shift it lets through, and the scores with it.

    Attributes
    ----------
    truncation
        The limits.
    scores
        By parameter; none where a choice could not be limited.
    chosen
        Which of these parameters the plan's search chose, if it chose this truncation.
    """

    truncation: Truncation
    scores: tuple[float | None, ...]
    chosen: int | None


@dataclass(frozen=True, slots=True)
class ShownSearch:
    """One monitor's search as the page shows it.

    Attributes
    ----------
    search
        What was found.
    taken
        Whether the plan holds a monitor of this kind at all.
    edited
        In words, that the plan does not hold what was chosen; empty where it does.
    surface
        The surface of the chosen statistic.
    grid
        Its rows.
    best
        The least score in it.
    """

    search: Search
    taken: bool
    edited: str
    surface: Surface | None
    grid: tuple[GridRow, ...]

    @property
    def best(self) -> float:
        """The least score of the grid."""
        return min((score for row in self.grid for score in row.scores if score is not None), default=0.0)

    def shade(self, score: float) -> int:
        """How near a score is to the least one: 5 within 2 %, then 5, 10, 20 and 50 %, 0 beyond."""
        return sum(score <= (1 + near) * self.best for near in _NEAR)


def shown_searches(stream: StreamAppraisal, tuning: StreamTuning) -> tuple[ShownSearch, ...]:
    """Every search of a stream."""
    return tuple(_shown(stream, tuning, search) for search in tuning.searches)


def _shown(stream: StreamAppraisal, tuning: StreamTuning, search: Search) -> ShownSearch:
    chosen = next((one for one in search.surfaces if _chose(search, one)), None)
    return ShownSearch(
        search,
        any(one.watches == search.watches for one in stream.monitors),
        edited(stream.monitors, search, tuning.together),
        chosen,
        tuple(_rows(tuning, search, chosen, stream.unit)),
    )


def edited(monitors: tuple[MonitorAppraisal, ...], search: Search, together: str) -> str:
    """What the plan holds instead of the monitor that a search chose; empty where it holds it."""
    like = [one for one in monitors if one.watches == search.watches]
    if any(_comparable(one.words) == _comparable(search.chosen) for one in like):
        return ""
    if like:
        return (
            f"The plan no longer holds the monitor that this search chose: it was edited by hand, or made anew without a search. "
            f"The plan's: {like[0].words}."
        )
    return "" if together or not monitors else "The plan holds no such monitor: it was taken out by hand."


def _comparable(told: str) -> list[str]:
    """A monitor's description without what a search cannot know: the values that a moving share counts are learned after it."""
    parts = told.split(", ")
    return parts[:2] + parts[3:] if parts[0] == "moving share" else parts


def _chose(search: Search, surface: Surface) -> bool:
    """Whether the chosen monitor is of this statistic, second parameter included."""
    named = search.chosen.startswith(f"{surface.statistic}, ")
    return named and all(part in search.chosen for part in surface.more.split(", ") if part)


def _rows(tuning: StreamTuning, search: Search, surface: Surface | None, unit: str) -> Iterator[GridRow]:
    if surface is None:
        return
    for place, scores in zip(surface.rows, surface.scores, strict=True):
        truncation = tuning.truncations[place]
        here = f", {results_in_words(truncation, unit)}{_SCALES[truncation.transform]}"
        told = search.chosen.removesuffix(_MIX)
        at = [i for i, one in enumerate(surface.columns) if told.endswith(here) and _has(told, surface.parameter, one)]
        yield GridRow(truncation, scores, at[0] if at else None)


def _has(told: str, parameter: str, value: float) -> bool:
    return told.split(", ")[1].endswith(_PARAMETERS[parameter].format(value))


def results_in_words(truncation: Truncation, unit: str) -> str:
    """Which results are taken, as monitors are described."""
    low, high = truncation.low, truncation.high
    if low is None and high is None:
        return "all results"
    sides = ([f"below {low:g}"] if low is not None else []) + ([f"above {high:g}"] if high is not None else [])
    beyond = "set to the limit" if truncation.mode == "winsorize" else "left out"
    return f"results {' or '.join(sides)} {unit} {beyond}"


def limits_in_brief(truncation: Truncation) -> str:
    """Truncation limits as a table bears them, such as "125 to 155"."""
    low, high = truncation.low, truncation.high
    if low is None and high is None:
        return "none"
    if low is None or high is None:
        return f"up to {high:g}" if low is None else f"from {low:g}"
    return f"{low:g} to {high:g}"


def rounds_in_words(search: Search) -> str:
    """How many choices met how many onsets, round by round."""
    return ", then ".join(
        f"{words.whole(count)} at {words.whole(onsets)} onsets of each error" for count, onsets in search.rounds
    )
