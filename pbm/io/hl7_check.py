"""Which HL7 messages are read at all: results (ORU^R01, OUL^R22 and R23) of version 2, for production; others are refused in its terms.

An error (AE) is a fault of the message's content, a rejection (AR) says that its kind is not for this receiver. Source: HL7 version 2.8.2,
chapter 2 (acknowledgement, processing rules), tables 0008, 0103, 0357.
"""

from typing import Literal

from pbm.io.hl7_segments import Header

_READ = {"ORU": {"", "R01"}, "OUL": {"R22", "R23"}}
LONGEST_NAME = 199  # characters of a control id, a specimen number and the like


class RefusedMessageError(Exception):
    """A message that is not taken.

    Attributes
    ----------
    kind
        "E" error or "R" rejection.
    number
        Of HL7 table 0357.
    text
        What is wrong.
    """

    def __init__(self, kind: Literal["E", "R"], number: int, text: str) -> None:
        super().__init__(text)
        self.kind, self.number, self.text = kind, number, text


def check(header: Header) -> None:
    """See that a message is one that is read.

    Raises
    ------
    RefusedMessageError
        If it is not.
    """
    kind, event = header.component(9, 1), header.component(9, 2)
    if kind not in _READ:
        raise RefusedMessageError("R", 200, "this receiver reads messages ORU and OUL")
    if event not in _READ[kind]:
        raise RefusedMessageError("R", 201, "this receiver reads events R01 of ORU, R22 and R23 of OUL")
    if header.first(11) != "P":
        raise RefusedMessageError("R", 202, "this receiver reads messages for production (MSH-11 P)")
    if header.first(12)[:2] not in ("", "2."):
        raise RefusedMessageError("R", 203, "this receiver reads version 2")
    if not header.first(10):
        raise RefusedMessageError("E", 101, "MSH-10 is empty")
    if max(map(len, (header.first(10), header.first(3), header.first(4)))) > LONGEST_NAME:
        raise RefusedMessageError("E", 102, f"MSH-3, MSH-4 or MSH-10 is longer than {LONGEST_NAME} characters")


def is_acknowledgement(header: Header) -> bool:
    """Whether the message answers another one; such a message is never answered."""
    return header.component(9, 1) in ("ACK", "MCF")
