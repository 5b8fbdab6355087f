"""A history replayed as a feed: the results of all its streams in order of time, and a position from which to go on after a stop."""

import hashlib
import json
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from pbm.io.history import read_history, stream_sizes
from pbm.records.reading import Chunk
from pbm.records.result import Result
from pbm.records.stream import StreamHistory

MOST_RESULTS = 500


class Replay:
    """Replays a history.

    Parameters
    ----------
    folder
        The history.
    position
        Where an earlier watch stopped; "" to begin. A history that has changed since is another edition and begins anew.

    Attributes
    ----------
    source
        Name of the feed.

    Raises
    ------
    InputError
        If there is no history, or it cannot be read.
    """

    def __init__(self, folder: Path, position: str = "") -> None:
        self.source = self.name(folder)
        self._folder = folder
        self._sizes = stream_sizes(folder)
        sizes = json.dumps({str(name): size for name, size in sorted(self._sizes.items())})
        self._mark = hashlib.sha256(sizes.encode()).hexdigest()[:16]
        self._edition, self._read = 1, 0
        if position:
            at = json.loads(position)
            same = at["mark"] == self._mark
            self._edition, self._read = (at["edition"], at["read"]) if same else (at["edition"] + 1, 0)

    @staticmethod
    def name(folder: Path) -> str:
        """The name of the feed that a folder makes."""
        return f"history {folder.absolute()}"

    def chunks(self, most: int = MOST_RESULTS) -> Iterator[Chunk]:
        """The results that are left, at most so many at once."""
        streams = [read_history(self._folder, name) for name in sorted(self._sizes)]
        time = np.concatenate([one.time for one in streams])
        stream = np.repeat(np.arange(len(streams)), [len(one) for one in streams])
        row = np.concatenate([np.arange(len(one)) for one in streams])
        order = np.argsort(time, kind="stable")
        for first in range(self._read, len(order), most):
            chosen = order[first : first + most]
            results = [
                _result(streams[s], r) for s, r in zip(stream[chosen].tolist(), row[chosen].tolist(), strict=True)
            ]
            position = json.dumps({"edition": self._edition, "mark": self._mark, "read": first + len(results)})
            yield Chunk(self.source, self._edition, results, position)


def _result(stream: StreamHistory, row: int) -> Result:
    return Result(
        int(stream.time[row]),
        stream.name,
        float(stream.value[row]),
        int(stream.censor[row]),
        str(stream.specimen[row]),
        str(stream.ward[row]),
        sex=str(stream.sex[row]),
        age=str(stream.age[row]),
    )
