"""What a live feed hands in: one result as it was written, still text, or a piece of the feed that could not be read as one."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, NamedTuple

from pbm.records.event import LabEvent
from pbm.records.message import Annotation, MessageKey
from pbm.records.result import Result


class Reading(NamedTuple):
    """One result as a feed wrote it.

    Attributes
    ----------
    place
        Where it stands in the feed: the line.
    time, analyte, analyser, value, unit, specimen, ward, kind, patient, sex, age
        As written; "" where not given. Patient, sex and age are never kept as written: see `records.sex_and_age` for the last two.
    """

    place: int
    time: str
    analyte: str
    analyser: str
    value: str
    unit: str
    specimen: str
    ward: str
    kind: str
    patient: str = ""
    sex: str = ""
    age: str = ""


class SetAside(NamedTuple):
    """A piece of a feed that was not taken as a result, and why.

    Attributes
    ----------
    place
        Where it stands in the feed: the line.
    reason
        One of a few words that can be counted, such as "not a number".
    found
        What was found there, short; never a whole line, which could hold a patient's name.
    stream
        The stream it was meant for, as far as it is known.
    """

    place: int
    reason: str
    found: str = ""
    stream: str = ""


class Remark(NamedTuple):
    """Something about a piece of a feed that a person should know, and that left nothing out.

    Attributes
    ----------
    place
        Where it stands in the feed.
    text
        One of a few texts that can be counted.
    found
        What was found there, short.
    """

    place: int
    text: str
    found: str = ""


class Correction(NamedTuple):
    """A later word of a sender on a result that it reported before.

    Attributes
    ----------
    status
        "C" corrected, "D" deleted, "W" wrong, such as another patient's.
    at
        When it came, by the clock of the computer, UTC microseconds.
    reading
        The result as it is written now; it may have no value.
    """

    status: Literal["C", "D", "W"]
    at: int
    reading: Reading


class Message(NamedTuple):
    """A message of a feed that is answered.

    Attributes
    ----------
    key
        Which message.
    items
        How many of the chunk's items are its own.
    at
        When it came, by the clock of the computer, UTC microseconds.
    place
        Its number in the feed.
    code
        The acknowledgement that it gets once it is kept.
    """

    key: MessageKey
    items: int
    at: int
    place: int
    code: str = "AA"


class EventReading(NamedTuple):
    """A laboratory event as a feed wrote it.

    Attributes
    ----------
    place
        Where it stands in the feed: the line.
    time, event, analyte, analyser, detail
        As written; "" where not given.
    """

    place: int
    time: str
    event: str
    analyte: str
    analyser: str
    detail: str


Item = Reading | Result | SetAside | Remark | Correction | Annotation | EventReading | LabEvent


@dataclass(frozen=True, slots=True)
class Chunk:
    """Some consecutive pieces of one feed.

    Attributes
    ----------
    source, edition
        Name of the feed, and which edition of it: a feed begun anew (another file under the same name) has the next number.
    items
        What was read, in the order of the feed.
    position
        Where to go on after these items, as the feed understands it.
    messages
        Those that brought the items, in the same order, where the feed consists of messages; items that no message accounts for come last.
    arrived
        When they came, by the clock of the computer, UTC microseconds; None where a feed is replayed: then its own times are the clock.
    """

    source: str
    edition: int
    items: Sequence[Item]
    position: str
    messages: Sequence[Message] = ()
    arrived: int | None = None
