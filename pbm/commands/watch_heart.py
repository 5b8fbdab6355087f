"""The sign of life of `pbm watch`: a row in the store, at least every `EVERY` seconds while the store takes anything."""

import json
import os
import time
from collections.abc import Sequence
from contextlib import suppress

from pbm.commands.clock import now
from pbm.errors import FeedError
from pbm.io.store import Store
from pbm.records.notice import Heartbeat
from pbm.records.reading import Chunk
from pbm.records.snapshot import Batch

EVERY = 5.0  # seconds


class Heart:
    """Leaves signs of life.

    Parameters
    ----------
    store
        Where.
    shadow
        Whether the watch is on trial.
    """

    def __init__(self, store: Store, *, shadow: bool) -> None:
        self._store, self._started, self._next = store, now(), 0.0
        self._last_result = max((times[-1] for times in store.newest_times().values() if times), default=None)
        self._last_arrival: int | None = None
        self._state: dict[str, object] = {"shadow": shadow, "feeds": {}}
        self._feeds: dict[str, int] = {}

    def met(self, chunks: Sequence[Chunk], batch: Batch) -> None:
        """Something came, and was kept."""
        if not chunks:
            return
        self._last_arrival = now()
        self._feeds |= {chunk.source: self._last_arrival for chunk in chunks}
        if batch.results:
            newest = max(one.result.time for one in batch.results)
            self._last_result = newest if self._last_result is None else max(newest, self._last_result)

    def beat(self) -> None:
        """Leave a sign of life if it is time for one. While the store cannot take it there is none."""
        if time.monotonic() >= self._next:
            self._next = time.monotonic() + EVERY
            self._leave()

    def end(self) -> None:
        """Leave the last one: that the watch has ended is then known, and need not be inferred from its silence."""
        self._state["ended"] = True
        self._leave()

    def _leave(self) -> None:
        state = json.dumps(self._state | {"feeds": self._feeds})
        with suppress(FeedError):
            self._store.beat(Heartbeat(self._started, now(), os.getpid(), self._last_result, self._last_arrival, state))
