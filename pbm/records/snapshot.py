"""What the live watch keeps after some results: the results, the alarms they raised, and the state of every monitor they moved."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

from pbm.records.alarm import Alarm
from pbm.records.event import LabEvent
from pbm.records.message import Annotation, Answered, MessageKey
from pbm.records.notice import Notice
from pbm.records.reading import Remark, SetAside
from pbm.records.result import Result
from pbm.records.stream import StreamName

SENT_AGAIN, CORRECTION, KNOWN_EVENT = "message sent again", "later word on a result", "event known already"
DUPLICATE, RERUN, REPEAT, LATE = "duplicate", "rerun of the specimen", "same patient again", "too late"


@dataclass(frozen=True, slots=True)
class Snapshot:
    """A monitor after some result.

    Attributes
    ----------
    stream, monitor
        The stream and the index of the monitor in its plan.
    settings
        SHA-256 of what decides the monitor's course; a state goes on only under the same settings.
    state
        Everything the monitor needs to go on, as bytes.
    taken, admitted
        Results offered to the monitor, and those that its statistic took since it began, or began afresh after an event.
    needed
        Admitted results before the statistic is judged.
    value
        The statistic, on its own scale; not a number while it is not judged.
    episode
        +1 in an open alarm above the limit, -1 below, 0 armed.
    """

    stream: StreamName
    monitor: int
    settings: str
    state: bytes
    taken: int
    admitted: int
    needed: int
    value: float
    episode: int


class Edition(NamedTuple):
    """One edition of a feed: a file from its first line on; the same feed begun anew is another edition."""

    source: str
    number: int


class KeptResult(NamedTuple):
    """A result as it is kept, and why no monitor took it ("" if it counts): a rerun, or one that came too late, is kept too."""

    result: Result
    left_out: str
    edition: Edition


@dataclass(frozen=True, slots=True)
class Earlier:
    """Results already kept that some new ones may be copies or reruns of.

    Attributes
    ----------
    runs
        Stream and specimen -> time, value and censor of each result, and whether it is a first run.
    unnamed
        Stream, time, value and censor of results without a specimen -> the editions that held one.
    visits
        Stream and patient's token -> times of the results that count.
    answered
        Messages with the same sender and control id -> the code that they were answered with.
    """

    runs: dict[tuple[StreamName, str], dict[tuple[int, float, int], bool]] = field(default_factory=dict)
    unnamed: dict[tuple[StreamName, int, float, int], set[Edition]] = field(default_factory=dict)
    visits: dict[tuple[StreamName, str], list[int]] = field(default_factory=dict)
    answered: dict[MessageKey, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Batch:
    """What belongs to one transaction: either all of it is kept or nothing.

    Attributes
    ----------
    results
        In order of arrival.
    alarms
        Each with the index of its result in `results`.
    snapshots
        Of the monitors that the results moved.
    newest
        Of the streams that moved: the newest times that their monitors have taken, ascending.
    set_aside
        Source and piece of the feed that was not taken as a result.
    tallies
        Reason -> number of pieces set aside for it, among them those that are only counted.
    positions
        Feed -> where it goes on.
    delivered
        Feed -> results and pieces set aside that it brought, copies of results among them; nothing of a message sent again.
    messages
        Answered once the batch is kept.
    annotations
        Later words on results.
    events
        Each with the number of results in `results` that came before it.
    notices
        That begin or, with `closed_at`, end.
    remarks
        Source and what a person should know about a piece of the feed; they are told, not kept.
    """

    results: Sequence[KeptResult] = ()
    alarms: Sequence[tuple[int, Alarm]] = ()
    snapshots: Sequence[Snapshot] = ()
    newest: Mapping[StreamName, Sequence[int]] = field(default_factory=dict)
    set_aside: Sequence[tuple[str, SetAside]] = ()
    tallies: Mapping[str, int] = field(default_factory=dict)
    positions: Mapping[str, str] = field(default_factory=dict)
    delivered: Mapping[str, int] = field(default_factory=dict)
    messages: Sequence[Answered] = ()
    annotations: Sequence[Annotation] = ()
    events: Sequence[tuple[int, LabEvent]] = ()
    notices: Sequence[Notice] = ()
    remarks: Sequence[tuple[str, Remark]] = ()
