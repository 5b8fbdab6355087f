"""The content of a frame -> what is to be kept of an HL7 message and how it is answered, or why it is refused; a pure function."""

import codecs
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import lru_cache
from hashlib import sha256

from pbm.io.hl7_ack import answer, codes
from pbm.io.hl7_characters import decode
from pbm.io.hl7_check import RefusedMessageError, check, is_acknowledgement
from pbm.io.hl7_results import ResultReader
from pbm.io.hl7_segments import Header, segments
from pbm.records.laboratory import Lab
from pbm.records.message import MessageKey
from pbm.records.reading import Item, Message, Remark, SetAside

TAKEN = "AA"
REFUSED = "message refused: "
_BEFORE = codecs.BOM_UTF8 + b"\r\n"  # bytes that may stand before a header


@dataclass(frozen=True, slots=True)
class Received:
    """What one frame brought.

    Attributes
    ----------
    items
        What the message holds; of a refused one, why.
    message
        None if it is refused.
    answers
        To send, in order, once the rest is kept.
    """

    items: Sequence[Item]
    message: Message | None
    answers: Sequence[bytes]


class MessageReader:
    """Reads messages as `lab.toml` says.

    Parameters
    ----------
    lab
        The laboratory.
    """

    def __init__(self, lab: Lab) -> None:
        self._results = ResultReader(lab)
        self._fall_back = lab.feed.encoding

    def read(self, content: bytes, place: int, at: int) -> Received:
        """Read one message.

        Parameters
        ----------
        content
            The bytes of its frame.
        place
            Its number in the feed.
        at
            Now, UTC microseconds.
        """
        header = _header(content)
        if header is not None and is_acknowledgement(header):
            return Received([Remark(place, "an acknowledgement, where results were expected")], None, [])
        try:
            message, items = self._taken(header, content, place, at)
        except RefusedMessageError as refusal:
            return _refused(header, refusal, place, at)
        return Received(items, message, _answers(header, None, place, at))

    def refuse_too_long(self, head: bytes, place: int, at: int) -> Received:
        """The answer to a message of which only the first bytes were held."""
        return _refused(
            _header(head), RefusedMessageError("E", 207, "it is longer than feed.largest_message"), place, at
        )

    def _taken(self, header: Header | None, content: bytes, place: int, at: int) -> tuple[Message, list[Item]]:
        if header is None:
            raise RefusedMessageError("R", 100, "it does not begin with a segment MSH that tells its delimiters")
        check(header)
        declared = header.first(18)
        try:
            text, told = decode(content, declared, self._fall_back)
        except UnicodeDecodeError:
            raise RefusedMessageError("E", 102, "its characters are not those that MSH-18 declares") from None
        if "\0" in text:
            raise RefusedMessageError("E", 102, "it holds a zero byte")
        items: list[Item] = [Remark(place, "characters not as declared", told)] if told else []
        items += self._results.read(header, segments(text, header.delimiters), place, at)
        sender = f"{header.first(3)}^{header.first(4)}"
        key = MessageKey(sender, header.first(10), sha256(content).hexdigest())
        return Message(key, len(items), at, place, TAKEN), items


def _header(content: bytes) -> Header | None:
    """The header byte for byte: so an answer repeats its parts as they came, whatever the characters."""
    first = content.lstrip(_BEFORE).partition(b"\r")[0]
    return Header.of(first.decode("latin-1"))


def _refused(header: Header | None, refusal: RefusedMessageError, place: int, at: int) -> Received:
    number = header.first(10)[:40] if header else ""
    return Received([SetAside(place, REFUSED + refusal.text, number)], None, _answers(header, refusal, place, at))


def _answers(header: Header | None, refusal: RefusedMessageError | None, place: int, at: int) -> list[bytes]:
    return [
        answer(header, code, refusal, _stamp(at // 1_000_000), f"{at:x}.{place}{code[0]}").encode("latin-1")
        for code in codes(header, refusal)
    ]


@lru_cache(16)
def _stamp(second: int) -> str:
    return datetime.fromtimestamp(second, UTC).strftime("%Y%m%d%H%M%S+0000")
