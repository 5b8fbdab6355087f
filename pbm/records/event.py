"""A laboratory event: what was done to an analyser or a stream that a monitor or a look-back should know of."""

from dataclasses import dataclass
from typing import Literal, get_args

EventKind = Literal[
    "calibration",
    "reagent lot",
    "maintenance",
    "control accepted",
    "control rejected",
    "restart",
    "keep the old centre",
    "note",
]
EVENT_KINDS: tuple[EventKind, ...] = get_args(EventKind)


@dataclass(frozen=True, slots=True)
class LabEvent:
    """One event.

    Attributes
    ----------
    time
        When it happened, UTC microseconds.
    kind
        One of `EVENT_KINDS`.
    analyte, analyser
        What it is about; "" for every analyte of the analyser, or every analyser.
    detail
        The lot, the control material and its value, or words of a person; "" where not given.
    source
        The feed that brought it, or who entered it.
    at
        When it came, by the clock of the computer, UTC microseconds.
    effect
        What the watch did because of it, in words; "" if nothing.
    """

    time: int
    kind: EventKind
    analyte: str
    analyser: str
    detail: str
    source: str
    at: int
    effect: str = ""
