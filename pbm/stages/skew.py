"""The clock of an analyser against that of the computer: whether the times on its results fit the moment at which they arrive.

Of the last `SEEN` results of an analyser all lie ahead of their arrival by more than `AHEAD`: its clock is ahead. All arrive later than
`BEHIND` after their time: its clock is behind (an hour, say, when clocks are changed), or results are held up. One result that is delayed,
or repeated with an old time, says nothing.
"""

from collections import defaultdict, deque
from collections.abc import Iterable

from pbm.records.notice import Notice
from pbm.stages.liveness import duration

SKEW = "clock skew"
SEEN = 20
_MINUTE = 60_000_000
AHEAD, BEHIND = 2 * _MINUTE, 45 * _MINUTE


class ClockSkew:
    """What the last results of each analyser say of its clock."""

    def __init__(self) -> None:
        self._after: dict[str, deque[int]] = defaultdict(lambda: deque(maxlen=SEEN))
        self._touched: dict[str, None] = {}
        self._open: dict[str, Notice] = {}

    def go_on(self, open_notices: Iterable[Notice]) -> None:
        """Go on with the notices that are open."""
        self._open = {one.analyser: one for one in open_notices if one.kind == SKEW}

    def hear(self, analyser: str, time: int, arrived: int) -> None:
        """A result with this time arrived then."""
        self._after[analyser].append(arrived - time)
        self._touched[analyser] = None

    def judge(self, now: int) -> list[Notice]:
        """Notices that begin or end with what was heard since this was last asked."""
        said = [one for analyser in self._touched for one in self._judged(analyser, now)]
        self._touched.clear()
        return said

    def _judged(self, analyser: str, now: int) -> list[Notice]:
        after = self._after[analyser]
        if len(after) < SEEN:
            return []
        text, before = _in_words(analyser, min(after), max(after)), self._open.get(analyser)
        if text and not before:
            self._open[analyser] = Notice(now, SKEW, "", analyser, text)
            return [self._open[analyser]]
        if before and not text:
            del self._open[analyser]
            return [Notice(before.time, SKEW, "", analyser, f"{before.text}; times fit again", now)]
        return []


def _in_words(analyser: str, least: int, most: int) -> str:
    if most < -AHEAD:
        return f"times on results of {analyser} lie {duration(-most)} ahead of the computer's clock"
    if least > BEHIND:
        return (
            f"results of {analyser} come {duration(least)} or more after their times: held up, or its clock is behind"
        )
    return ""
