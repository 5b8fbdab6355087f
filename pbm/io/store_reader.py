"""The store as its readers see it: opened read-only, no transaction held between two questions (a held one makes the log grow)."""

from pathlib import Path

from sqlalchemy import inspect

from pbm.errors import InputError
from pbm.io import store_rows
from pbm.io.store_engine import reading_engine
from pbm.io.store_errors import told
from pbm.io.store_migrations import check_version
from pbm.io.store_place import Place, in_words
from pbm.records.alarm import Alarm
from pbm.records.event import LabEvent
from pbm.records.message import Annotation
from pbm.records.notice import Heartbeat, Notice
from pbm.records.result import Result
from pbm.records.snapshot import Snapshot
from pbm.records.stream import StreamName


class StoreReader:
    """Reads a store while `pbm watch` writes it, or after.

    Raises
    ------
    InputError
        If there is no store.
    FeedError
        From here and every method: the database cannot be read.
    """

    def __init__(self, place: Place) -> None:
        self.place = place
        self._engine = reading_engine(place)
        if isinstance(place, Path) and not place.is_file():
            raise _no_store(place)
        with told(place), self._engine.connect() as connection:
            if not isinstance(place, Path) and not inspect(connection).has_table("schema"):
                raise _no_store(place)
            check_version(connection, place)

    def alarms(self, count: int = 100) -> list[Alarm]:
        """The last alarms, the newest last."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.last_alarms(connection, count)

    def open_alarms(self) -> list[Alarm]:
        """The alarm of every monitor whose episode is still open, the newest last."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.open_alarms(connection)

    def snapshots(self) -> list[Snapshot]:
        """Every monitor as it was last kept."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.snapshots(connection)

    def recent_results(self, name: StreamName, count: int) -> list[Result]:
        """The last results of a stream that counted, in order of arrival."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.recent_results(connection, name, count)

    def events(self, count: int = 100) -> list[LabEvent]:
        """The last laboratory events in order of arrival, the newest last."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.last_events(connection, count)

    def notices(self, count: int = 100) -> list[Notice]:
        """The last notices, the newest last."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.last_notices(connection, count)

    def annotations(self, count: int = 100) -> list[Annotation]:
        """The last later words on results, the newest last."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.last_annotations(connection, count)

    def open_notices(self) -> list[Notice]:
        """The notices that last, the newest last."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.open_notices(connection)

    def heartbeat(self) -> Heartbeat | None:
        """The sign of life of the watch; None before its first."""
        with told(self.place), self._engine.connect() as connection:
            return store_rows.sign_of_life(connection)


def _no_store(place: Place) -> InputError:
    return InputError(f"There is no store {in_words(place)}. `pbm watch` makes it.")
