"""Bytes of a connection <-> framed messages: 0x0B message 0x1C 0x0D (HL7 Minimal Lower Layer Protocol, release 1). No socket here.

A frame ends only with both of its last bytes: a single 0x1C inside could otherwise make half a message look whole. A start byte inside a
frame begins a new one, and so does the next start byte after a frame that is too long or bytes that belong to none. Nothing but the frame
in hand is held, and no more of it than its largest size.
"""

from dataclasses import dataclass
from typing import Literal

START, END = b"\x0b", b"\x1c\r"
HEAD = 2048  # bytes kept of a frame that is too long: enough to answer it


@dataclass(frozen=True, slots=True)
class Frame:
    """A whole message, without the bytes that frame it."""

    content: bytes


@dataclass(frozen=True, slots=True)
class Fault:
    """Bytes that are no whole message.

    Attributes
    ----------
    kind
        Bytes outside any frame; a frame without its end; a frame longer than allowed.
    length
        Bytes of it; of a frame that is too long, as many as were held.
    head
        First bytes of a frame that is too long.
    """

    kind: Literal["outside", "broken off", "too long"]
    length: int
    head: bytes = b""


Event = Frame | Fault


class Framer:
    """Finds the frames in what one connection brings, piece by piece; how it is cut into pieces makes no difference.

    Parameters
    ----------
    largest
        Bytes of the largest message that is taken.
    """

    def __init__(self, largest: int) -> None:
        self._largest = largest
        self._held = bytearray()  # the frame in hand and what came behind it
        self._begin = 0  # of the frame in hand, in what is held
        self._searched = 0  # up to where neither its end nor a start was found
        self._inside = False
        self._outside = 0  # bytes outside any frame since the last one
        self._skipping = False  # the rest of a frame that is too long

    def feed(self, piece: bytes) -> list[Event]:
        """What the next piece completes, in order."""
        events: list[Event] = []
        self._held += piece
        while self._advance(events):
            pass
        del self._held[: self._begin]
        self._searched, self._begin = self._searched - self._begin, 0
        return events

    def end(self) -> list[Event]:
        """What is left when the connection ends; nothing may be fed afterwards."""
        events: list[Event] = [Fault("broken off", len(self._held))] if self._inside else []
        self._tell_outside(events)
        return events

    @property
    def in_hand(self) -> bool:
        """Whether a frame has begun and not ended."""
        return self._inside

    def _advance(self, events: list[Event]) -> bool:
        """Go over one frame, or what stands outside; whether there may be more."""
        return self._frame(events) if self._inside else self._seek_start(events)

    def _seek_start(self, events: list[Event]) -> bool:
        """Leave behind what stands before the next start."""
        at = self._held.find(START, self._begin)
        if not self._skipping:
            self._outside += (len(self._held) if at < 0 else at) - self._begin
        if at < 0:
            self._begin = len(self._held)
            return False
        self._tell_outside(events)
        self._begin_frame(at + 1)
        return True

    def _frame(self, events: list[Event]) -> bool:
        held, begin = self._held, self._begin
        limit = begin + self._largest + len(END)
        since = max(begin, self._searched - 1)  # an end may be cut between its two bytes
        end = held.find(END, since, limit)
        start = held.find(START, since, limit if end < 0 else end)
        if start >= 0:
            events.append(Fault("broken off", start - begin))
            self._begin_frame(start + 1)
        elif end >= 0:
            events.append(Frame(bytes(held[begin:end])))
            self._inside, self._begin = False, end + len(END)
        elif len(held) >= limit:
            events.append(Fault("too long", limit - begin, bytes(held[begin : min(limit, begin + HEAD)])))
            self._inside, self._skipping, self._begin = False, True, limit
        else:
            self._searched = len(held)
            return False
        return True

    def _begin_frame(self, at: int) -> None:
        self._inside, self._skipping = True, False
        self._begin = self._searched = at

    def _tell_outside(self, events: list[Event]) -> None:
        if self._outside:
            events.append(Fault("outside", self._outside))
            self._outside = 0


def framed(message: bytes) -> bytes:
    """A message as it is sent."""
    return START + message + END
