"""What is kept of a message that was answered, so that it counts once however often it is sent; and what a later one says of a result."""

from dataclasses import dataclass
from typing import Literal, NamedTuple

from pbm.records.stream import StreamName


class MessageKey(NamedTuple):
    """What makes two messages the same one.

    Attributes
    ----------
    sender
        Sending application and facility, as written.
    control_id
        The sender's number of the message; senders begin their numbers anew.
    sha256
        Of the content, in hexadecimal.
    """

    sender: str
    control_id: str
    sha256: str


class Answered(NamedTuple):
    """A message and its answer.

    Attributes
    ----------
    key
        Which message.
    code
        The acknowledgement code that was answered (AA, AE, AR, CA, CE, CR).
    at
        When it came, by the clock of the computer, UTC microseconds.
    """

    key: MessageKey
    code: str
    at: int


@dataclass(frozen=True, slots=True)
class Annotation:
    """A later word on a result; the result as it was first reported stays as it is.

    Attributes
    ----------
    stream, specimen
        Of the result.
    time
        When the result was measured, as the message says; UTC microseconds.
    status
        "C" corrected, "D" deleted, "W" wrong, such as another patient's.
    value
        As corrected, as written; "" where none is given.
    at
        When the word came, by the clock of the computer, UTC microseconds.
    source, place
        The feed, and where in it.
    """

    stream: StreamName
    specimen: str
    time: int
    status: Literal["C", "D", "W"]
    value: str
    at: int
    source: str
    place: int
