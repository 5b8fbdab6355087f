"""Results of a live feed that wait a little, so that they are taken in the order in which they were measured.

Each waits for `reorder_seconds` of lab.toml after its arrival, by the clock that is handed in. When its time is up it is taken, and before
it every waiting result of its stream that was measured earlier. So two results of a stream of which the earlier one arrives at most that
long after the other are taken in their order, whatever the order of arrival. What was measured before a result that was taken already comes
too late: it is kept, and no monitor takes it. At most `MOST` results wait; one more is taken as it comes.

Without a wait, which is how it is unless the laboratory asks for it, results are taken as they arrive: an alarm need not wait either.
"""

import json
from collections.abc import Iterable
from typing import Any, NamedTuple

from pbm.records.result import Result
from pbm.records.snapshot import Edition
from pbm.records.stream import StreamName

WAITING = "waiting"  # the feed under whose name the store keeps the results that wait
MOST = 2_000
FULL = "more results than may wait for their order: taken as they come"


class Waiting(NamedTuple):
    """A result, when it arrived, and the edition of the feed that brought it."""

    arrived: int
    result: Result
    edition: Edition


class ReorderBuffer:
    """The results that wait.

    Parameters
    ----------
    wait
        For how long, microseconds; 0 for not at all.
    """

    def __init__(self, wait: int) -> None:
        self.wait = wait
        self._waiting: list[Waiting] = []

    def __len__(self) -> int:
        return len(self._waiting)

    @property
    def is_full(self) -> bool:
        """Whether no more may wait."""
        return len(self._waiting) >= MOST

    def put(self, result: Result, edition: Edition, arrived: int) -> None:
        """Let a result wait."""
        self._waiting.append(Waiting(arrived, result, edition))

    def over(self, now: int) -> list[Waiting]:
        """Those that are to be taken by now, in the order in which they are; they stay."""
        latest: dict[StreamName, int] = {}
        for one in self._waiting:
            if not now - self.wait < one.arrived <= now:  # the clock may have gone back since
                latest[one.result.stream] = max(one.result.time, latest.get(one.result.stream, one.result.time))
        over = (one for one in self._waiting if one.result.time <= latest.get(one.result.stream, one.result.time - 1))
        return sorted(over, key=_order)

    def take(self, now: int) -> list[Waiting]:
        """The same; they leave."""
        over = self.over(now)
        if over:
            gone = set(map(id, over))
            self._waiting = [one for one in self._waiting if id(one) not in gone]
        return over

    @property
    def state(self) -> str:
        """The results that wait, as text."""
        return json.dumps([_as_list(one) for one in self._waiting], separators=(",", ":")) if self._waiting else ""

    def go_on(self, state: str) -> None:
        """Go on with the results that waited then."""
        self._waiting = [_from_list(given) for given in json.loads(state)] if state else []


def _order(one: Waiting) -> tuple[Any, ...]:
    """In the order of measurement; of the same moment in one that does not depend on arrival."""
    result = one.result
    return (result.time, result.stream, result.specimen, result.value, result.censor, one.arrived)


def _as_list(one: Waiting) -> list[Any]:
    result, stream = one.result, one.result.stream
    rest = (result.value, result.censor, result.specimen, result.ward, result.patient, result.sex, result.age)
    return [one.arrived, *one.edition, result.time, stream.analyte, stream.analyser, *rest]


def _from_list(given: Iterable[Any]) -> Waiting:
    arrived, source, edition, time, analyte, analyser, *rest = given
    return Waiting(arrived, Result(time, StreamName(analyte, analyser), *rest), Edition(source, edition))
