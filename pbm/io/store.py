"""The store as its one writer sees it: results, alarms, states of monitors and positions of feeds, in one transaction a batch.

What was kept survives a kill and a power cut. The statements are SQLAlchemy Core; store_engine.py knows which database it is.
"""

import json
from collections.abc import Iterable, Sequence
from contextlib import ExitStack
from dataclasses import asdict
from pathlib import Path
from types import TracebackType

from sqlalchemy import insert, inspect, select, update

from pbm.io import store_audit, store_retention, store_rows
from pbm.io.store_batch import BatchRows, Numbers
from pbm.io.store_engine import writing_engine
from pbm.io.store_errors import told
from pbm.io.store_migrations import migrate
from pbm.io.store_place import Place
from pbm.io.store_prepared import asking
from pbm.io.store_questions import COUNTED_VISITS, RUNS, UNNAMED_RESULTS
from pbm.io.store_retention import Sweep
from pbm.io.store_schema import (
    SCHEMA_VERSION,
    alarms,
    audit,
    feeds,
    metadata,
    schema,
    streams,
)
from pbm.io.store_schema import heartbeat as heartbeats
from pbm.io.writer_lock import WriterLock
from pbm.records.alarm import Alarm
from pbm.records.event import LabEvent
from pbm.records.message import MessageKey
from pbm.records.notice import Heartbeat, Notice
from pbm.records.result import Result
from pbm.records.snapshot import RERUN, Batch, Earlier, Edition, Snapshot
from pbm.records.stream import StreamName


class Store:
    """The store of a laboratory, opened to write; a context manager.

    Raises
    ------
    FeedError
        Here and from every method: another process writes to the store, or the database cannot go on. Nothing of a batch is then kept.
    """

    def __init__(self, place: Place) -> None:
        self.place = place
        with ExitStack() as opened:
            if isinstance(place, Path):
                opened.callback(WriterLock(place).release)
            with told(place):
                engine = writing_engine(place)
                opened.callback(engine.dispose)
                self._connection = opened.enter_context(engine.connect())
                self._prepare()
            self._opened = opened.pop_all()

    def __enter__(self) -> "Store":
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the database and let others write."""
        self._opened.close()

    def _prepare(self) -> None:
        with self._connection.begin():
            if not inspect(self._connection).has_table("schema"):
                metadata.create_all(self._connection)
                self._connection.execute(insert(schema).values(version=SCHEMA_VERSION))
            migrate(self._connection, self.place)
            self._numbers = Numbers.read(self._connection)

    # What a batch asks before it is kept

    def position(self, source: str) -> str:
        """Where a feed goes on; "" for a feed never read."""
        with told(self.place), self._connection.begin():
            return self._connection.execute(select(feeds.c.position).where(feeds.c.source == source)).scalar() or ""

    def earlier(self, some: Iterable[Result], messages: Iterable[MessageKey] = ()) -> Earlier:
        """What is kept of the same specimens and patients; of results without a specimen, what is kept of the same moment.

        Of messages, those with the same sender and number that were answered.
        """
        asked = list(some)
        found = Earlier()
        with told(self.place), asking(self._connection):
            found.answered.update(store_rows.codes_answered(self._connection, messages))
            if named := {one.specimen for one in asked if one.specimen}:
                self._find_runs(named, found)
            if unnamed := {one.time for one in asked if not one.specimen}:
                self._find_unnamed(unnamed, found)
            if patients := {one.patient for one in asked if one.patient}:
                self._find_visits(patients, found)
        return found

    def _find_runs(self, specimens: set[str], found: Earlier) -> None:
        names = self._names()
        rows = RUNS.ask(self._connection, specimens=list(specimens))
        for stream, specimen, time, value, censor, left_out in rows:
            runs = found.runs.setdefault((names[stream], specimen), {})
            runs[time, value, censor] = left_out != RERUN

    def _find_unnamed(self, times: set[int], found: Earlier) -> None:
        names, sources = self._names(), {number: source for source, number in self._numbers.feeds.items()}
        rows = UNNAMED_RESULTS.ask(self._connection, times=list(times))
        for stream, time, value, censor, feed, edition in rows:
            editions = found.unnamed.setdefault((names[stream], time, value, censor), set())
            editions.add(Edition(sources[feed], edition))

    def _find_visits(self, patients: set[str], found: Earlier) -> None:
        names = self._names()
        for stream, patient, time in COUNTED_VISITS.ask(self._connection, patients=list(patients)):
            found.visits.setdefault((names[stream], patient), []).append(time)

    def _names(self) -> dict[int, StreamName]:
        return {number: name for name, number in self._numbers.streams.items()}

    # What is kept

    def keep(self, batch: Batch) -> None:
        """Keep a batch: all of it, on the disk, or (with an error) nothing of it; the same batch may then be tried again."""
        with told(self.place):
            with self._connection.begin():
                rows = BatchRows(self._connection, self._numbers)
                rows.write(batch)
            self._numbers = rows.numbers

    def remove_old(self, sweep: Sweep, at: int) -> Sweep | None:
        """Go one step further in removing what is old; the sweep as it stands then, None when it is done.

        Parameters
        ----------
        sweep
            As this returned it; `Sweep(before)` to begin.
        at
            Now, UTC microseconds.
        """
        with told(self.place), self._connection.begin():
            return store_retention.step(self._connection, sweep, at)

    def beat(self, heartbeat: Heartbeat) -> None:
        """Leave a sign of life."""
        with told(self.place), self._connection.begin():
            row = asdict(heartbeat)
            if self._connection.execute(update(heartbeats).values(row)).rowcount == 0:
                self._connection.execute(insert(heartbeats), row)

    # How a watch begins

    def plan_in_force(self) -> str:
        """SHA-256 of the plan under which the store was last written; "" if it never was."""
        with told(self.place), self._connection.begin():
            return (
                self._connection.execute(select(audit.c.plan_after).order_by(audit.c.id.desc()).limit(1)).scalar() or ""
            )

    def snapshots(self) -> list[Snapshot]:
        """Every monitor as it was kept."""
        with told(self.place), self._connection.begin():
            return store_rows.snapshots(self._connection)

    def open_alarms(self) -> list[Alarm]:
        """The alarm of every monitor whose episode is still open, the newest last."""
        with told(self.place), self._connection.begin():
            return store_rows.open_alarms(self._connection)

    def alarms_after(self, number: int) -> list[tuple[int, Alarm]]:
        """The alarms with a higher number, with their numbers, in their order; those of a watch on trial are not among them."""
        with told(self.place), self._connection.begin():
            return store_rows.alarms_after(self._connection, number)

    @property
    def last_alarm(self) -> int:
        """Number of the last alarm; 0 if there is none."""
        return self._numbers.last[alarms]

    def open_notices(self) -> list[Notice]:
        """The notices that last, the newest last."""
        with told(self.place), self._connection.begin():
            return store_rows.open_notices(self._connection)

    def events(self, count: int = 1000) -> list[LabEvent]:
        """The last laboratory events in order of arrival, the newest last."""
        with told(self.place), self._connection.begin():
            return store_rows.last_events(self._connection, count)

    def recent_results(self, name: StreamName, count: int) -> list[Result]:
        """The last results of a stream that counted, in order of arrival."""
        with told(self.place), self._connection.begin():
            return store_rows.recent_results(self._connection, name, count)

    def newest_times(self) -> dict[StreamName, list[int]]:
        """The newest times that the monitors of each stream have taken, ascending."""
        with told(self.place), self._connection.begin():
            return {
                StreamName(one.analyte, one.analyser): json.loads(one.newest)
                for one in self._connection.execute(select(streams))
            }

    def begin(self, at: int, what: str, plan_sha256: str, detail: str, states: Sequence[Snapshot]) -> None:
        """Put the monitors of a plan in the place of those kept, and say so in the audit.

        Parameters
        ----------
        at
            Now, UTC microseconds.
        what, detail
            What is done, in words.
        plan_sha256
            The plan that is in force from now on.
        states
            Every monitor of the plan as it begins.
        """
        with told(self.place):
            with self._connection.begin():
                rows = BatchRows(self._connection, self._numbers)
                rows.replace_states(states)
                store_audit.append(self._connection, at, what, detail, plan_sha256)
            self._numbers = rows.numbers
