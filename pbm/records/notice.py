"""What the watch tells beside alarms: a stream that is quiet, a clock that is wrong; and the sign of life that it leaves in the store."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Notice:
    """Something that a person should know; `time`, `kind`, `analyte` and `analyser` together say which notice it is.

    Attributes
    ----------
    time
        When it began, UTC microseconds.
    kind
        One or two words that can be counted, such as "quiet" or "clock skew".
    analyte, analyser
        The stream; "" for every analyte of the analyser, or every analyser.
    text
        For a person.
    closed_at
        When it ended, UTC microseconds; None while it lasts.
    """

    time: int
    kind: str
    analyte: str
    analyser: str
    text: str
    closed_at: int | None = None


@dataclass(frozen=True, slots=True)
class Heartbeat:
    """The sign of life of a watch.

    Attributes
    ----------
    started, at
        When the watch began, and now, by the clock of the computer; UTC microseconds.
    pid
        Its process.
    last_result
        Time of the newest result that it has kept; None before the first.
    last_arrival
        When the last result came in, by the clock of the computer; None before the first.
    state
        Of the feeds and streams, as JSON for `pbm watch --health` and the bench.
    """

    started: int
    at: int
    pid: int
    last_result: int | None
    last_arrival: int | None
    state: str = "{}"
