"""One batch of the live feed in the making: what each piece of a feed comes to, and all that is to be kept of it in one transaction."""

from collections import Counter
from collections.abc import Sequence
from typing import TYPE_CHECKING

from pbm.records.alarm import Alarm
from pbm.records.event import LabEvent
from pbm.records.message import Annotation, Answered
from pbm.records.reading import Chunk, Item, Message, Remark, SetAside
from pbm.records.result import Result
from pbm.records.snapshot import (
    CORRECTION,
    DUPLICATE,
    KNOWN_EVENT,
    LATE,
    REPEAT,
    RERUN,
    SENT_AGAIN,
    Batch,
    Earlier,
    Edition,
    KeptResult,
)
from pbm.records.stream import RERUN_HOURS, StreamName
from pbm.stages.liveness import CLOCK
from pbm.stages.reorder import FULL, WAITING

if TYPE_CHECKING:
    from pbm.stages.live import Live, LiveStream

REUSED_NUMBER = "a control id met before, with other content: taken as a new message"
_HOUR = 3_600_000_000


class BatchWork:
    """One batch in the making."""

    def __init__(self, live: "Live", earlier: Earlier) -> None:
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
        self._waiting_moved = False

    def take(self, chunk: Chunk) -> None:
        """Take a piece of a feed."""
        edition, items = Edition(chunk.source, chunk.edition), self._not_taken_before(chunk)
        if chunk.arrived is not None:
            self._live.liveness.tick(chunk.arrived)
            self._last = chunk.arrived
        for item in items:
            if isinstance(item, Result):
                self._take_or_let_wait(item, edition, chunk.arrived)
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
        self._delivered[chunk.source] += sum(isinstance(item, SetAside) for item in items)

    def _take_or_let_wait(self, result: Result, edition: Edition, arrived: int | None) -> None:
        buffer = self._live.reorder
        if arrived is None or not buffer.wait or buffer.is_full:
            if buffer.is_full:
                self._remarks.append((edition.source, Remark(0, FULL, str(result.stream))))
            self._delivered[edition.source] += 1
            self._take_result(result, edition, arrived)
            return
        self._hear(result, arrived)
        stream = self._streams.get(result.stream)
        buffer.put(stream.kept(result) if stream else of_whom_is_kept(result, "", ""), edition, arrived)
        self._waiting_moved = True

    def take_waiting(self, now: int) -> None:
        """Take the results that have waited long enough."""
        for one in self._live.reorder.take(now):
            self._waiting_moved = True
            self._delivered[WAITING] += 1  # they are accounted for when they are taken, whichever feed brought them
            self._take_result(one.result, one.edition, None, heard=True)

    @property
    def last_arrival(self) -> int:
        """When the last chunk arrived; 0 where none came by the clock of the computer."""
        return self._last

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
            self._tallies[KNOWN_EVENT] += 1
            return
        self._events.append((len(self._results), taken[0]))
        self._moved |= {name: self._streams[name] for name in taken[1]}

    def _hear(self, result: Result, arrived: int | None) -> None:
        """A sign of life."""
        liveness = self._live.liveness
        liveness.hear(result.stream, liveness.believed(result.time) if arrived is None else arrived)
        if arrived is not None:
            self._live.skew.hear(result.stream.analyser, result.time, arrived)

    def _take_result(self, result: Result, edition: Edition, arrived: int | None, *, heard: bool = False) -> None:
        reason = self._copy_of_another(result, edition)
        if reason == DUPLICATE:
            self._tallies[DUPLICATE] += 1
            return
        if not heard:
            self._hear(result, arrived)
        stream = self._streams.get(result.stream)
        if not reason and result.patient:
            reason = self._repeat(result)
        if not reason and stream is not None and stream.is_late(result.time, in_order=self._live.reorder.wait > 0):
            reason = LATE
        kept = stream.kept(result) if stream is not None else of_whom_is_kept(result, "", "")
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
        if self._waiting_moved:
            self._positions[WAITING] = live.reorder.state
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


def of_whom_is_kept(result: Result, sex: str, age: str) -> Result:
    """A result with only so much of whom it is of."""
    if (sex, age) == (result.sex, result.age):
        return result
    # Spelt out: `replace` takes ten times as long, and every result passes here.
    time, stream, value, censor = result.time, result.stream, result.value, result.censor
    return Result(time, stream, value, censor, result.specimen, result.ward, result.patient, sex, age)
