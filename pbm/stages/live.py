"""All monitors of a laboratory on the live feed: which results count, in which order, and what they move.

- A result counts once. A further one of the same specimen in the stream within 24 hours is a rerun; with the same time and value it is a
  duplicate. A result without a specimen is a duplicate only of one in another edition of a feed.
- Where repeats are limited, a result counts once for a patient in so many hours; within them another one is kept, and no monitor takes it.
- Results are taken in order of arrival and never held back: an alarm must not wait for a later result, and neighbours may swap without
  harm to a statistic. One that is older than the stream's newest results by more than `SLACK` is late: it is kept, and no monitor takes it.
  The bar is the fifth newest time, so that a few times that lie in the future do not shut out what follows.
- Laboratory events reach the monitors that they are about (events.py); what comes, and when, says who is quiet (liveness.py, skew.py).
"""

from bisect import insort
from collections import Counter
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace

from pbm.errors import PlanError
from pbm.records.alarm import Alarm
from pbm.records.event import EventKind, LabEvent
from pbm.records.laboratory import Lab
from pbm.records.message import Annotation, Answered
from pbm.records.notice import Notice
from pbm.records.plan import Plan
from pbm.records.reading import Chunk, Correction, EventReading, Item, Message, Reading, Remark, SetAside
from pbm.records.result import Result
from pbm.records.snapshot import (
    CORRECTION,
    DUPLICATE,
    LATE,
    REPEAT,
    RERUN,
    SENT_AGAIN,
    Batch,
    Earlier,
    Edition,
    KeptResult,
    Snapshot,
)
from pbm.records.stream import RERUN_HOURS, StreamName
from pbm.stages.estimate import WINDOW
from pbm.stages.event_reading import read_event
from pbm.stages.events import EventDesk
from pbm.stages.liveness import CLOCK, Liveness
from pbm.stages.monitor import StreamMonitor
from pbm.stages.reading import Reader
from pbm.stages.skew import ClockSkew

SLACK = 90 * 60_000_000  # microseconds; more than the hour that clocks are put back
NEWEST = 5
REUSED_NUMBER = "a control id met before, with other content: taken as a new message"
_HOUR = 3_600_000_000


class LiveStream:
    """A watched stream: its monitors, and the newest times that they have taken (ascending)."""

    def __init__(self, monitors: Sequence[StreamMonitor]) -> None:
        self.monitors = tuple(monitors)
        self.newest: list[int] = []
        baselines = [one.plan.baseline for one in monitors if one.plan.baseline]
        self._needs_sex, self._needs_age = (any(one.sexes for one in baselines), any(one.ages for one in baselines))

    def kept(self, result: Result) -> Result:
        """A result as it may be kept: sex and age only where a monitor that starts again must know them."""
        return _of_whom_is_kept(result, result.sex if self._needs_sex else "", result.age if self._needs_age else "")

    def is_late(self, time: int) -> bool:
        """Whether a result comes too late for the monitors."""
        return len(self.newest) == NEWEST and time < self.newest[0] - SLACK

    def take(self, result: Result) -> list[Alarm]:
        """Take the next result; the alarms that it opens."""
        insort(self.newest, result.time)
        del self.newest[:-NEWEST]
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


def _of_whom_is_kept(result: Result, sex: str, age: str) -> Result:
    return result if (sex, age) == (result.sex, result.age) else replace(result, sex=sex, age=age)


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

        Returns
        -------
        list
            The monitors that go on.
        """
        states = {(one.stream, one.settings): one.state for one in kept}
        self.desk.go_on(events)
        self.liveness.go_on(clock, notices)
        self.skew.go_on(notices)
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
            What is kept of the same specimens; results taken here are added to it.
        """
        work = _Work(self, earlier)
        for chunk in chunks:
            work.take(chunk)
        return work.batch()

    def tick(self, now: int) -> Batch:
        """Nothing came until `now`, by the clock of the computer: what there is to tell of that."""
        self.liveness.tick(now)
        return _Work(self, Earlier()).batch()

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


class _Work:
    """One batch in the making."""

    def __init__(self, live: Live, earlier: Earlier) -> None:
        self._live, self._streams, self._earlier = live, live.streams, earlier
        self._results: list[KeptResult] = []
        self._alarms: list[tuple[int, Alarm]] = []
        self._set_aside: list[tuple[str, SetAside]] = []
        self._tallies: Counter[str] = Counter()
        self._positions: dict[str, str] = {}
        self._delivered: Counter[str] = Counter()
        self._moved: dict[StreamName, LiveStream] = {}
        self._messages: list[Answered] = []
        self._numbers = {key[:2] for key in earlier.answered}  # sender and control id
        self._annotations: list[Annotation] = []
        self._remarks: list[tuple[str, Remark]] = []
        self._events: list[tuple[int, LabEvent]] = []
        self._last = 0

    def take(self, chunk: Chunk) -> None:
        edition, items = Edition(chunk.source, chunk.edition), self._not_taken_before(chunk)
        if chunk.arrived is not None:
            self._live.liveness.tick(chunk.arrived)
            self._last = chunk.arrived
        for item in items:
            if isinstance(item, Result):
                self._take_result(item, edition, chunk.arrived)
            elif isinstance(item, LabEvent):
                self._take_event(item)
            elif isinstance(item, SetAside):
                self._tallies[item.reason] += 1
                self._set_aside.append((chunk.source, item))
            elif isinstance(item, Annotation):
                self._tallies[CORRECTION] += 1
                self._annotations.append(item)
            elif isinstance(item, Remark):
                self._remarks.append((chunk.source, item))
        self._positions[chunk.source] = chunk.position
        self._delivered[chunk.source] += sum(isinstance(item, Result | SetAside) for item in items)

    def _not_taken_before(self, chunk: Chunk) -> Sequence[Item]:
        """The items but for those of messages that were answered before."""
        if not chunk.messages:
            return chunk.items
        items: list[Item] = []
        at = 0
        for message in chunk.messages:
            if message.key in self._earlier.answered:
                self._tallies[SENT_AGAIN] += 1
            else:
                items += self._remember(message)
                items += chunk.items[at : at + message.items]
            at += message.items
        return items + list(chunk.items[at:])

    def _remember(self, message: Message) -> list[Item]:
        """Answer a message from now on as it is answered now; what is to be told of its number."""
        self._messages.append(Answered(message.key, message.code, message.at))
        met = message.key[:2] in self._numbers
        self._numbers.add(message.key[:2])
        self._earlier.answered[message.key] = message.code
        return [Remark(message.place, REUSED_NUMBER, message.key.control_id)] if met else []

    def _take_event(self, event: LabEvent) -> None:
        taken = self._live.desk.take(event)
        if taken is None:
            self._tallies[DUPLICATE] += 1
            return
        self._events.append((len(self._results), taken[0]))
        self._moved |= {name: self._streams[name] for name in taken[1]}

    def _hear(self, result: Result, arrived: int | None) -> None:
        """A sign of life."""
        liveness = self._live.liveness
        liveness.hear(result.stream, liveness.believed(result.time) if arrived is None else arrived)
        if arrived is not None:
            self._live.skew.hear(result.stream.analyser, result.time, arrived)

    def _take_result(self, result: Result, edition: Edition, arrived: int | None) -> None:
        reason = self._copy_of_another(result, edition)
        if reason == DUPLICATE:
            self._tallies[DUPLICATE] += 1
            return
        self._hear(result, arrived)
        stream = self._streams.get(result.stream)
        if not reason and result.patient:
            reason = self._repeat(result)
        if not reason and stream is not None and stream.is_late(result.time):
            reason = LATE
        kept = stream.kept(result) if stream is not None else _of_whom_is_kept(result, "", "")
        self._results.append(KeptResult(kept, reason, edition))
        if reason:
            self._tallies[reason] += 1
        elif stream is not None:
            self._moved[result.stream] = stream
            self._alarms += [(len(self._results) - 1, alarm) for alarm in self._live.alarms(result)]

    def _copy_of_another(self, result: Result, edition: Edition) -> str:
        """Why a result does not count; "" if it does. It is remembered for those that follow."""
        measured = (result.time, result.value, result.censor)
        if not result.specimen:
            held = self._earlier.unnamed.setdefault((result.stream, *measured), set())
            copy = bool(held - {edition})
            held.add(edition)
            return DUPLICATE if copy else ""
        runs = self._earlier.runs.setdefault((result.stream, result.specimen), {})
        if measured in runs:
            return DUPLICATE
        rerun = any(first and abs(result.time - time) <= RERUN_HOURS * _HOUR for (time, _, _), first in runs.items())
        runs[measured] = not rerun
        return RERUN if rerun else ""

    def _repeat(self, result: Result) -> str:
        counted = self._earlier.visits.setdefault((result.stream, result.patient), [])
        within = self._live.repeat_hours(result.stream) * _HOUR
        if any(abs(result.time - time) <= within for time in counted):
            return REPEAT
        counted.append(result.time)
        return ""

    def batch(self) -> Batch:
        """What is to be kept."""
        live = self._live
        said = [notice for stream in self._moved.values() for notice in stream.said()]
        notices = sorted(
            [*said, *live.liveness.said(), *live.skew.judge(self._last)], key=lambda one: one.closed_at or one.time
        )
        if live.liveness.places and (self._positions or notices):
            self._positions[CLOCK] = live.liveness.state
        return Batch(
            results=self._results,
            alarms=self._alarms,
            snapshots=[monitor.snapshot() for stream in self._moved.values() for monitor in stream.monitors],
            newest={name: tuple(stream.newest) for name, stream in self._moved.items()},
            set_aside=self._set_aside,
            tallies=dict(self._tallies),
            positions=self._positions,
            delivered=dict(self._delivered),
            messages=self._messages,
            annotations=self._annotations,
            remarks=self._remarks,
            events=self._events,
            notices=notices,
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
