"""Whether results still come: an analyser or stream that is silent for longer than its history makes likely is told as quiet.

The silence of a place (an analyser, or a stream) is measured in the results that its rhythm expects in it (methods/silence.py), on the
clock that is handed in: that of the computer for a live feed, the results' own times where a feed is replayed. A notice begins at the
very instant at which the silence became too long, whenever that is looked at, and ends with the next result. While an analyser is quiet,
its streams are not told one by one.

A clock that goes back does not lengthen or shorten a silence. After a start, and after a time in which the watch did not run, nothing is
judged for `GRACE`: what waited to be sent has time to come in.
"""

import json
from collections.abc import Iterable
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

from pbm.methods.silence import expected_between, silence_ends
from pbm.records.notice import Notice
from pbm.records.plan import Plan
from pbm.records.rhythm import Rhythm
from pbm.records.stream import StreamName

CLOCK = "clock"  # the feed under whose name the store keeps how far the clock has come
QUIET, CLOCK_CHANGED = "quiet", "clock"
_SECOND = 1_000_000
GRACE = 120 * _SECOND
UNNOTICED = 60 * _SECOND  # the watch looks at the clock far more often
BACK = 2 * _SECOND  # smaller corrections of a clock are none of anybody's business
FAR, SURE = 24 * 3600 * _SECOND, 5
_NEVER = 2**63


class Place:
    """An analyser, or one of its streams: its rhythm, when it was last heard, and its notice while it is quiet."""

    def __init__(self, analyte: str, analyser: str, rhythm: Rhythm, zone: ZoneInfo) -> None:
        self.analyte, self.analyser, self.rhythm = analyte, analyser, rhythm
        self.notice: Notice | None = None
        self._zone = zone
        self._heard: int | None = None
        self._due: int | None = None

    @property
    def name(self) -> str:
        """As people call it."""
        return f"{self.analyte}@{self.analyser}" if self.analyte else self.analyser

    @property
    def heard(self) -> int | None:
        """When it was last heard; None if it never was."""
        return self._heard

    @heard.setter
    def heard(self, clock: int | None) -> None:
        self._heard, self._due = clock, None

    @property
    def due(self) -> int:
        """When its silence will have lasted too long."""
        if self._due is None:
            found = None if self._heard is None else self._end(self._heard)
            self._due = _NEVER if found is None else found
        return self._due

    def _end(self, heard: int) -> int | None:
        return silence_ends(heard, self.rhythm.quiet_at, self.rhythm.by_hour, self._zone)

    def silence(self, until: int) -> str:
        """Its silence in words."""
        heard = until if self._heard is None else self._heard
        expected = expected_between(heard, until, self.rhythm.by_hour, self._zone)
        return f"quiet for {duration(until - heard)}, {expected:.0f} expected"


class Liveness:
    """The places of a plan that have a rhythm, on one clock."""

    def __init__(self, plan: Plan, zone: ZoneInfo) -> None:
        self._zone = zone
        self._analysers = {name: Place("", name, rhythm, zone) for name, rhythm in plan.analysers.items()}
        named = {StreamName.parse(text): stream.rhythm for text, stream in plan.streams.items()}
        self._streams = {
            name: Place(name.analyte, name.analyser, rhythm, zone) for name, rhythm in named.items() if rhythm
        }
        self._said: list[Notice] = []
        self._clock, self._far, self._looked, self._next, self._judged_from = 0, 0, False, 0, 0

    @property
    def places(self) -> list[Place]:
        """Analysers first."""
        return [*self._analysers.values(), *self._streams.values()]

    def is_quiet(self, name: StreamName) -> bool:
        """Whether a stream or its analyser is quiet."""
        both = (self._analysers.get(name.analyser), self._streams.get(name))
        return any(place is not None and place.notice is not None for place in both)

    def said(self) -> list[Notice]:
        """Notices that began or ended since this was last asked."""
        said, self._said = self._said, []
        return said

    # Between two runs

    @property
    def state(self) -> str:
        """When each place was last heard, as text; with the open notices it is all that is needed to go on."""
        heard = {place.name: place.heard for place in self.places if place.heard is not None}
        return json.dumps({"clock": self._clock, "far": self._far, "heard": heard}, separators=(",", ":"))

    def believed(self, time: int) -> int:
        """The clock of a replay at a result with this time: one that is far ahead is believed when `SURE` in a row are."""
        self._far = self._far + 1 if self._clock and time > self._clock + FAR else 0
        return time if self._far in (0, SURE) else self._clock

    def go_on(self, state: str, open_notices: Iterable[Notice]) -> None:
        """Go on from a state and the notices that were open then; "" to begin. A notice of a place that is no longer watched is closed."""
        kept: dict[str, Any] = json.loads(state) if state else {"clock": 0, "far": 0, "heard": {}}
        self._clock, self._far, self._next = kept["clock"], kept["far"], 0
        quiet = {(one.analyte, one.analyser): one for one in open_notices if one.kind == QUIET}
        for place in self.places:
            place.heard = kept["heard"].get(place.name)
            place.notice = quiet.pop((place.analyte, place.analyser), None)
        self._said += [_ended(one, self._clock, "no longer watched") for one in quiet.values()]

    # The clock

    def tick(self, now: int) -> None:
        """The clock of the computer stands at `now`: told before what arrived then is heard, and when nothing arrived."""
        passed = now - self._clock
        if self._clock and passed < -BACK:
            self._went_back(now)
        elif passed > UNNOTICED:
            if self._looked:
                self._tell_clock(
                    now, f"nothing was watched for {duration(passed)}: the computer slept, or its clock was put forward"
                )
            self._judged_from = now + GRACE
        self._looked = True
        self.move(now)

    def move(self, clock: int) -> None:
        """The clock stands at `clock`, or further if it was further already."""
        if not self._clock:
            for place in self.places:
                place.heard = clock if place.heard is None else place.heard
        self._clock = max(self._clock, clock)
        if self._clock >= self._next and self._clock >= self._judged_from:
            self._look()

    def hear(self, name: StreamName, clock: int) -> None:
        """A result of a stream came; `clock` as in `move`, which comes first."""
        self.move(clock)
        analyser, stream = self._analysers.get(name.analyser), self._streams.get(name)
        if analyser is not None:
            if analyser.notice:
                self._hear_anew(analyser)
            self._heard(analyser)
        if stream is not None:
            self._heard(stream)

    def _hear_anew(self, analyser: Place) -> None:
        """The streams of an analyser that was quiet were silent with it: each of them has its own time from now on."""
        for one in self._streams.values():
            if one.analyser == analyser.analyser and not one.notice:
                one.heard = self._clock

    def _heard(self, place: Place) -> None:
        if place.notice:
            silent = duration(self._clock - (place.heard or 0))
            self._said.append(_ended(place.notice, self._clock, f"results again after {silent}"))
            place.notice, self._next = None, 0
        place.heard = self._clock

    def _look(self) -> None:
        """Tell what has become quiet, in the order in which it did; and know when to look again."""
        for place in sorted(
            (one for one in self.places if one.due <= self._clock), key=lambda one: (one.due, one.name)
        ):
            above = self._analysers.get(place.analyser)
            if place.notice is None and (above is None or above.notice is None):
                text = f"{place.name} {place.silence(place.due)}"
                place.notice = Notice(place.due, QUIET, place.analyte, place.analyser, text)
                self._said.append(place.notice)
        self._next = min((one.due for one in self.places if one.due > self._clock), default=_NEVER)

    def _went_back(self, now: int) -> None:
        by = self._clock - now
        for place in self.places:
            place.heard = None if place.heard is None else place.heard - by
        self._clock, self._next, self._judged_from = now, 0, min(self._judged_from, now + GRACE)
        self._tell_clock(
            now, f"the computer's clock went back by {duration(by)}; silences are counted on from where they were"
        )

    def _tell_clock(self, now: int, text: str) -> None:
        at = datetime.fromtimestamp(now / 1e6, self._zone)
        self._said.append(Notice(now, CLOCK_CHANGED, "", "", f"at {at:%H:%M:%S} {text}", now))


def _ended(notice: Notice, clock: int, how: str) -> Notice:
    return Notice(notice.time, notice.kind, notice.analyte, notice.analyser, f"{notice.text}; {how}", clock)


def duration(microseconds: int) -> str:
    """A length of time in words: 45 s, 12 min, 3 h 10 min, 2 days."""
    seconds = microseconds // _SECOND
    if seconds < 120:
        return f"{seconds} s"
    hours, minutes = divmod(seconds // 60, 60)
    if hours < 2:
        return f"{hours * 60 + minutes} min"
    return f"{hours} h {minutes:02d} min" if hours < 48 else f"{hours // 24} days"
