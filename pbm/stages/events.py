"""Laboratory events as they reach the live watch: each counts once, and is handed to the monitors of the streams that it is about.

An event is the same as another one with the same time, kind, analyte, analyser and detail. What it does to a monitor says `[events]` of
lab.toml; when it does so is told in stages/monitor.py. One that comes more than a day after results that its stream has already taken is
kept, and changes nothing any more.
"""

from collections.abc import Iterable, Mapping
from dataclasses import replace
from typing import Protocol

from pbm.records.event import EventKind, LabEvent
from pbm.records.stream import StreamName
from pbm.records.watching import EventRules

ALWAYS_RESTART: tuple[EventKind, ...] = ("restart", "keep the old centre")
CONTROLS: tuple[EventKind, ...] = ("control accepted", "control rejected")
OLD = 24 * 3_600_000_000
_Identity = tuple[int, EventKind, str, str, str]


class Concerned(Protocol):
    """A stream as events see it."""

    newest: list[int]

    def note(self, time: int, kind: EventKind) -> int:
        """Hand an event to its monitors; how many they are."""


class EventDesk:
    """Where events come in.

    Parameters
    ----------
    rules
        What events do.
    streams
        Those with a monitor.
    """

    def __init__(self, rules: EventRules, streams: Mapping[StreamName, Concerned]) -> None:
        self._rules, self._streams = rules, streams
        self._known: set[_Identity] = set()

    def go_on(self, known: Iterable[LabEvent]) -> None:
        """Go on with the events that were kept."""
        self._known = {_identity(one) for one in known}

    def take(self, event: LabEvent) -> tuple[LabEvent, list[StreamName]] | None:
        """The event with its effect, and the streams whose monitors it reached; None if it is known."""
        if _identity(event) in self._known:
            return None
        self._known.add(_identity(event))
        about = [name for name in self._streams if concerns(event, name)]
        if not self._does_something(event.kind):
            return event, []
        reached = [name for name in about if not _is_too_old(event, self._streams[name].newest)]
        monitors = sum(self._streams[name].note(event.time, event.kind) for name in reached)
        missed = len(about) - len(reached)
        late = f"too late for {missed} stream{'s' * (missed != 1)}" if missed else ""
        return replace(event, effect="; ".join(filter(None, (self._effect(event.kind, monitors), late)))), reached

    def _does_something(self, kind: EventKind) -> bool:
        return kind in (*CONTROLS, *ALWAYS_RESTART, *self._rules.restart, *self._rules.relearn)

    def _effect(self, kind: EventKind, monitors: int) -> str:
        """What it does, in words."""
        if kind in CONTROLS:
            return ""
        if not monitors:
            return "no monitor is concerned"
        does = []
        if kind in (*ALWAYS_RESTART, *self._rules.restart):
            does.append("begin afresh")
        if kind == "keep the old centre":
            does.append("go back to the centre of before")
        if kind in self._rules.relearn:
            does.append(
                f"learn their centre again over {self._rules.relearn_over} results, at most {self._rules.relearn_at_most:g} TEa away"
            )
        return f"{monitors} monitor{'s' * (monitors != 1)} to {' and '.join(does)}"


def concerns(event: LabEvent, stream: StreamName) -> bool:
    """Whether an event is about a stream."""
    return event.analyser in ("", stream.analyser) and event.analyte in ("", stream.analyte)


def _identity(event: LabEvent) -> _Identity:
    return (event.time, event.kind, event.analyte, event.analyser, event.detail)


def _is_too_old(event: LabEvent, newest: list[int]) -> bool:
    return bool(newest) and event.kind not in CONTROLS and event.time < newest[0] - OLD
