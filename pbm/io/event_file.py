"""Laboratory events in a delimited file that grows, with the columns time, event, analyte, analyser and detail."""

from dataclasses import replace
from pathlib import Path

from pbm.io.follow import FollowedFile
from pbm.records.laboratory import Extract
from pbm.records.reading import Chunk, EventReading, Reading

# A followed file knows columns by the roles that they have for results.
_COLUMNS = Extract(time="time", analyte="analyte", analyser="analyser", value="event", specimen="detail")


class EventFile(FollowedFile):
    """A file of events that is followed; read, positioned and rotated as a file of results is.

    Parameters
    ----------
    path
        The file.
    position
        Where an earlier watch stopped; "" to begin.
    """

    def __init__(self, path: Path, position: str = "") -> None:
        super().__init__(path, _COLUMNS, position)

    def read(self) -> Chunk | None:
        """The next whole lines; None if there are none yet."""
        chunk = super().read()
        if chunk is None:
            return None
        items = [_event(item) if isinstance(item, Reading) else item for item in chunk.items]
        return replace(chunk, items=items)


def _event(row: Reading) -> EventReading:
    return EventReading(row.place, row.time, row.value, row.analyte, row.analyser, row.specimen)
