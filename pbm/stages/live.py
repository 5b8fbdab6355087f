"""All monitors of a laboratory on the live feed: which results count, in which order, and what they move.

- A result counts once. A further one of the same specimen in the stream within 24 hours is a rerun; with the same time and value it is a
  duplicate. A result without a specimen is a duplicate only of one in another edition of a feed.
- Where repeats are limited, a result counts once for a patient in so many hours; within them another one is kept, and no monitor takes it.
- Results are taken in order of arrival: an alarm must not wait for a later result, and neighbours may swap without harm to a statistic; or,
  where the laboratory asks for it, after a short wait in the order of their times (reorder.py). One that is older than the stream's newest
  results by more than `SLACK`, or where they wait by anything, is late: it is kept, and no monitor takes it. The bar is the fifth newest
  time, so that a few times that lie in the future do not shut out what follows.
- Laboratory events reach the monitors that they are about (events.py); what comes, and when, says who is quiet (liveness.py, skew.py).
"""

from bisect import insort
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace

from pbm.errors import PlanError
from pbm.records.alarm import Alarm
from pbm.records.event import EventKind, LabEvent
from pbm.records.laboratory import Lab
from pbm.records.notice import Notice
from pbm.records.plan import Plan
from pbm.records.reading import Chunk, Correction, EventReading, Reading
from pbm.records.result import Result
from pbm.records.snapshot import (
    Batch,
    Earlier,
    Snapshot,
)
from pbm.records.stream import StreamName
from pbm.stages.estimate import WINDOW
from pbm.stages.event_reading import read_event
from pbm.stages.events import EventDesk
from pbm.stages.live_batch import BatchWork, of_whom_is_kept
from pbm.stages.liveness import Liveness
from pbm.stages.monitor import StreamMonitor
from pbm.stages.reading import Reader
from pbm.stages.reorder import ReorderBuffer
from pbm.stages.skew import ClockSkew

SLACK = 90 * 60_000_000  # microseconds; more than the hour that clocks are put back
NEWEST = 5
_DAY = 24 * 3600 * 1_000_000


class LiveStream:
    """A watched stream: its monitors, and the newest times that they have taken (ascending)."""

    def __init__(self, monitors: Sequence[StreamMonitor]) -> None:
        self.monitors = tuple(monitors)
        self.newest: list[int] = []
        baselines = [one.plan.baseline for one in monitors if one.plan.baseline]
        self._needs_sex, self._needs_age = (any(one.sexes for one in baselines), any(one.ages for one in baselines))

    def kept(self, result: Result) -> Result:
        """A result as it may be kept: sex and age only where a monitor that starts again must know them."""
        return of_whom_is_kept(result, result.sex if self._needs_sex else "", result.age if self._needs_age else "")

    def is_late(self, time: int, *, in_order: bool) -> bool:
        """Whether a result comes too late for the monitors; `in_order` where results wait, so that they come in order or not at all."""
        if in_order and self.newest:
            # A time that lies far ahead of the others is a wrong one, and is no bar.
            return time < max(one for one in self.newest if one <= self.newest[0] + SLACK)
        return len(self.newest) == NEWEST and time < self.newest[0] - SLACK

    def take(self, result: Result) -> list[Alarm]:
        """Take the next result; the alarms that it opens."""
        insort(self.newest, result.time)
        # A time more than a day ahead of a result that comes now was a wrong one: some a year must not raise the bar for all.
        self.newest = [time for time in self.newest if time <= result.time + _DAY][-NEWEST:]
        return [alarm for monitor in self.monitors if (alarm := monitor.take(result))]

    def note(self, time: int, kind: EventKind) -> int:
        """Hand a laboratory event to the monitors; how many they are."""
        for monitor in self.monitors:
            monitor.note(time, kind)
        return len(self.monitors)

    def said(self) -> list[Notice]:
        """What the monitors have to say since this was last asked."""
        said = [notice for monitor in self.monitors for notice in monitor.said]
        for monitor in self.monitors:
            monitor.said.clear()
        return said


class Live:
    """The streams of a plan on the live feed.

    Attributes
    ----------
    streams
        Those with a monitor.
    liveness
        Who is quiet.

    Parameters
    ----------
    lab, plan, plan_sha256
        The laboratory, the plan, and the hash by which alarms name it.
    shadow
        Whether alarms are marked as those of a watch on trial.

    Raises
    ------
    PlanError
        If the plan watches what the laboratory does not describe, or describes in another unit.
    """

    def __init__(self, lab: Lab, plan: Plan, plan_sha256: str, *, shadow: bool = False) -> None:
        self._shadow = shadow
        self._repeats = {key: one.repeat_hours for key, one in lab.analytes.items() if one.repeat_hours}
        self.streams: dict[StreamName, LiveStream] = {}
        for text, stream in plan.streams.items():
            if stream.monitors:
                name = StreamName.parse(text)
                _check_it_fits(lab, name, stream.unit)
                self.streams[name] = LiveStream(
                    [StreamMonitor(name, i, one, lab, plan_sha256) for i, one in enumerate(stream.monitors)]
                )
        self.liveness, self.skew = Liveness(plan, lab.laboratory.zone), ClockSkew()
        self.desk = EventDesk(lab.events, self.streams)
        self.reorder = ReorderBuffer(round(lab.feed.reorder_seconds * 1_000_000))

    @property
    def monitors(self) -> list[StreamMonitor]:
        """Every monitor of every stream."""
        return [monitor for stream in self.streams.values() for monitor in stream.monitors]

    def go_on(
        self,
        kept: Iterable[Snapshot],
        newest: Mapping[StreamName, Sequence[int]],
        recent: Callable[[StreamName, int], list[Result]],
        events: Iterable[LabEvent] = (),
        clock: str = "",
        notices: Sequence[Notice] = (),
        waiting: str = "",
    ) -> list[StreamMonitor]:
        """Go on from the states that were kept; a monitor whose settings have changed begins afresh.

        Parameters
        ----------
        kept
            The states.
        newest
            The newest times that each stream has taken, ascending.
        recent
            The last results of a stream that counted, at most so many, in order of arrival.
        events
            The laboratory events that were kept.
        clock
            Position of the feed "clock": when everything was last heard.
        notices
            Those that are open.
        waiting
            Position of the feed "waiting": the results that wait for their order.

        Returns
        -------
        list
            The monitors that go on.
        """
        states = {(one.stream, one.settings): one.state for one in kept}
        self.desk.go_on(events)
        self.liveness.go_on(clock, notices)
        self.skew.go_on(notices)
        self.reorder.go_on(waiting)
        going_on = []
        for name, stream in self.streams.items():
            stream.newest = list(newest.get(name, ()))
            for monitor in stream.monitors:
                if state := states.get((name, monitor.settings)):
                    monitor.go_on(state, recent(name, WINDOW))
                    going_on.append(monitor)
        return going_on

    def take(self, chunks: Iterable[Chunk], earlier: Earlier) -> Batch:
        """Take what the feeds brought.

        Parameters
        ----------
        chunks
            Pieces of the feeds, in order of arrival; readings already made into results.
        earlier
            What is kept of the same specimens as in the chunks and as in `waited`; results taken here are added to it.
        """
        work = BatchWork(self, earlier)
        for chunk in chunks:
            work.take(chunk)
        if work.last_arrival:
            work.take_waiting(work.last_arrival)
        return work.batch()

    def tick(self, now: int, earlier: Earlier) -> Batch:
        """Nothing came until `now`, by the clock of the computer: what there is to tell of that, and the results that have waited."""
        self.liveness.tick(now)
        work = BatchWork(self, earlier)
        work.take_waiting(now)
        return work.batch()

    def waited(self, chunks: Iterable[Chunk], now: int) -> list[Result]:
        """The results that will have waited long enough when these chunks are taken, or by `now` where there are none."""
        if not self.reorder.wait:
            return []
        last = max((chunk.arrived for chunk in chunks if chunk.arrived is not None), default=now)
        return [one.result for one in self.reorder.over(last)]

    def alarms(self, result: Result) -> list[Alarm]:
        """Take a result that counts; the alarms that it opens."""
        raised = self.streams[result.stream].take(result)
        return [replace(alarm, shadow=True) for alarm in raised] if self._shadow else raised

    def repeat_hours(self, name: StreamName) -> float:
        """Hours within which a patient's results count once; 0 where all count."""
        return self._repeats.get(name.analyte, 0.0)


def _check_it_fits(lab: Lab, name: StreamName, unit: str) -> None:
    if name.analyte not in lab.analytes:
        raise PlanError(
            f'plan.toml watches {name}, and lab.toml has no analyte "{name.analyte}". Describe it, or run `pbm tune` again.'
        )
    if unit != (described := lab.analytes[name.analyte].unit):
        raise PlanError(
            f"plan.toml watches {name} in {unit}, and lab.toml says that its unit is {described}. Correct lab.toml, or take the history "
            "again and run `pbm tune`."
        )


def read_chunk(chunk: Chunk, reader: Reader) -> Chunk:
    """The chunk with its readings made into results and events, or set aside."""
    items = [reader.read(item) if isinstance(item, Reading) else item for item in chunk.items]
    if any(isinstance(item, EventReading) for item in items):
        made = (
            read_event(one, reader.lab, chunk.source, chunk.arrived) if isinstance(one, EventReading) else one
            for one in items
        )
        items = list(made)
    if chunk.messages:
        items = [reader.annotation(one, chunk.source) if isinstance(one, Correction) else one for one in items]
    return replace(chunk, items=items)
