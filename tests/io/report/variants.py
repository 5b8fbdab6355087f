"""Streams that are not as usual: without a monitor, with a second one for imprecision, with one that harms; and the reasons of a search."""

from datetime import UTC, datetime
from typing import Any

from pbm.records.appraisal import StreamAppraisal
from pbm.records.figures import AloneAndWith, Figure
from pbm.records.judged import Judged
from pbm.records.tuning import RunnerUp, Search, StreamTuning, Surface, Truncation, Tuning


def judged_of(stream: StreamAppraisal) -> Judged:
    """What was judged of a stream that was."""
    assert stream.judged is not None
    return stream.judged


def with_judged(stream: StreamAppraisal, **changed: Any) -> StreamAppraisal:
    """The same stream, judged otherwise."""
    return stream.model_copy(update={"judged": judged_of(stream).model_copy(update=changed)})


def unwatched(stream: StreamAppraisal) -> StreamAppraisal:
    """The same stream if nothing was found for it: the figures of the controls alone."""
    without = with_judged(stream, false_alarms=None, no_fault=None, peers=None, objections=())
    return without.model_copy(update={"monitors": (), "verdict": "not useful here"})


def with_imprecision(stream: StreamAppraisal) -> StreamAppraisal:
    """A second monitor, with an upper limit alone."""
    (first,) = stream.monitors
    second = first.model_copy(
        update={
            "watches": "imprecision",
            "words": "moving SD, of 50 results, all results",
            "brief": "moving SD 50",
            "low": None,
            "limits": (None, first.limits[1]),
        }
    )
    return stream.model_copy(update={"monitors": (first, second)})


def more_with_monitor(found: Any) -> Any:
    """A figure that is a quarter higher with the monitor."""
    value = found.alone.value
    worse = Figure(value=1.25 * value, low=1.2 * value, high=1.3 * value)
    changed = {
        "with_monitor": worse,
        "fewer": Figure(value=-0.25 * value, low=-0.3 * value, high=-0.2 * value),
        "share_fewer": Figure(value=-0.25, low=-0.3, high=-0.2),
    }
    return found.model_copy(update=changed)


def harming(stream: StreamAppraisal) -> StreamAppraisal:
    """A monitor with which more unreliable results get out, and that alarms too often."""
    found = judged_of(stream)
    assert found.false_alarms is not None
    year: AloneAndWith = more_with_monitor(found.yearly.unreliable)
    changed = {
        "unreliable": more_with_monitor(found.unreliable),
        "worst_unreliable": more_with_monitor(found.worst_unreliable),
        "yearly": found.yearly.model_copy(update={"unreliable": year}),
        "faults": tuple(
            one.model_copy(update={"unreliable": more_with_monitor(one.unreliable)}) for one in found.faults
        ),
        "false_alarms": found.false_alarms.model_copy(update={"kept": False, "episodes": 9}),
        "objections": ("more harm than good: it saves nothing",),
    }
    return with_judged(stream, **changed).model_copy(update={"verdict": "not useful here"})


TRUNCATIONS = (
    Truncation(low=None, high=None, mode="truncate", transform="none", keeps=1.0, moves=1.0),
    Truncation(low=127, high=149, mode="truncate", transform="none", keeps=0.99, moves=0.95),
    Truncation(low=127, high=149, mode="winsorize", transform="none", keeps=1.0, moves=0.98),
    Truncation(low=None, high=149, mode="truncate", transform="log", keeps=0.995, moves=0.97),
)
CHOSEN = "EWMA, weight 0.05, results below 127 or above 149 mmol/L set to the limit, adjusted for patient mix"


def search(chosen: str = CHOSEN, watches: Any = "shift") -> Search:
    """A search over two statistics."""
    ewma = Surface(
        statistic="EWMA",
        more="",
        parameter="weight",
        columns=(0.01, 0.05, 0.2),
        rows=(0, 1, 2, 3),
        scores=((9.5, 8.8, 11.0), (9.4, 8.7, 10.1), (9.3, 8.4, 10.2), (None, 9.1, 12.0)),
    )
    share = Surface(
        statistic="moving share",
        more="beyond the outer 5 % on either side",
        parameter="window",
        columns=(25.0, 100.0),
        rows=(0,),
        scores=((13.0, None),),
    )
    return Search(
        watches=watches,
        candidates=14,
        rounds=((14, 40), (6, 250)),
        chosen=chosen,
        score=8.35,
        schedule_alone=14.2,
        runners_up=(RunnerUp(words="moving mean, of 40 results, all results", score=8.9, error=0.05, costs=0.0659),),
        surfaces=(ewma, share),
    )


def reasons(*searches: Search, together: str = "") -> StreamTuning:
    """Why a stream's monitors are what they are."""
    return StreamTuning(unit="mmol/L", truncations=TRUNCATIONS, searches=searches or (search(),), together=together)


def tuning(**streams: StreamTuning) -> Tuning:
    """The reasons of several streams, by name with "__" for "@"."""
    named = {name.replace("__", "@").replace("_", "-"): one for name, one in streams.items()}
    return Tuning(at=datetime(2031, 3, 22, tzinfo=UTC), streams=named)


def as_chosen(stream: StreamAppraisal) -> StreamAppraisal:
    """The stream with the monitor that the search above chose."""
    (first,) = stream.monitors
    return stream.model_copy(update={"monitors": (first.model_copy(update={"words": CHOSEN}),)})
