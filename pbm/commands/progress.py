"""How far the work on many streams is and how long it still takes: on stderr, only on a terminal; by their sizes, not their number."""

import sys
import time
from collections.abc import Mapping
from types import TracebackType
from typing import Any, Self

import typer

from pbm.records.stream import StreamName


class Progress:
    """A bar of the results done.

    Parameters
    ----------
    label
        Shown before the bar.
    sizes
        Results of each stream, in the order in which they are begun.
    at_once
        Streams that are worked on at the same time.
    """

    def __init__(self, label: str, sizes: Mapping[StreamName, int], at_once: int) -> None:
        self._sizes, self._pace, self._begun = sizes, Pace(sizes, at_once), time.monotonic()
        self._finished = 0
        self._bar: Any = typer.progressbar(
            length=sum(sizes.values()),
            label=label,
            file=sys.stderr,
            hidden=not sys.stderr.isatty(),
            show_eta=False,  # the library's takes what is under way as not begun
            item_show_func=lambda _: self._told(),
        )

    def __enter__(self) -> Self:
        self._bar.__enter__()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._bar.__exit__(kind, error, trace)

    def step(self, name: StreamName) -> None:
        """A stream is done."""
        self._finished += 1
        self._pace.done(name, self._now())
        self._bar.update(self._sizes[name])

    def _now(self) -> float:
        return time.monotonic() - self._begun

    def _told(self) -> str:
        streams, left = f"{self._finished} of {len(self._sizes)} streams", self._pace.left(self._now())
        return streams if left is None else f"{streams}, about {_in_words(left)} left"


class Pace:
    """Time left by the pace so far: results a second of one worker, on streams that are done.

    A worker that is free takes the next stream, so it is known since when each has been under way; what is done of it counts as done.
    Times are seconds since the beginning; for the parameters see `Progress`.
    """

    def __init__(self, sizes: Mapping[StreamName, int], at_once: int) -> None:
        names = list(sizes)
        self._sizes, self._at_once = sizes, at_once
        self._under_way = dict.fromkeys(names[:at_once], 0.0)
        self._waiting = dict.fromkeys(names[at_once:])
        self._results, self._seconds = 0, 0.0

    def done(self, name: StreamName, now: float) -> None:
        """A stream is done, and its worker takes the next."""
        if name not in self._under_way:  # done out of turn: then the one longest under way is not begun
            oldest = next(iter(self._under_way))
            self._under_way[name] = self._under_way.pop(oldest)
            del self._waiting[name]
            self._waiting = {oldest: None, **self._waiting}
        self._results += self._sizes[name]
        self._seconds += now - self._under_way.pop(name)
        if self._waiting:
            following = next(iter(self._waiting))
            del self._waiting[following]
            self._under_way[following] = now

    def left(self, now: float) -> float | None:
        """Seconds until all are done; None where no pace is known yet, or nothing is left."""
        if not self._under_way or not self._seconds:
            return None
        pace = self._results / self._seconds
        begun = [max(self._sizes[name] - pace * (now - since), 0.0) for name, since in self._under_way.items()]
        together = sum(begun) + sum(self._sizes[name] for name in self._waiting)
        return max(together / self._at_once, *begun) / pace


def _in_words(seconds: float) -> str:
    if seconds < 60:
        return f"{seconds:.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 5_400 else f"{seconds / 3_600:.1f} h"
