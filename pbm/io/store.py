"""The store as its one writer sees it: results, alarms, states of monitors and positions of feeds, in one transaction a batch.

SQLite in WAL mode with synchronous=FULL: what was kept survives a kill and a power cut. Every transaction begins IMMEDIATE. The statements
are SQLAlchemy Core; store_engine.py knows which database it is.
"""

import json
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Any

from sqlalchemy import (
    Table,
    bindparam,
    delete,
    func,
    insert,
    inspect,
    select,
    update,
)

from pbm.io import store_rows
from pbm.io.store_engine import writing_engine
from pbm.io.store_errors import told
from pbm.io.store_schema import (
    NAMED,
    SCHEMA_VERSION,
    UNNAMED,
    VISITS,
    alarms,
    audit,
    feeds,
    metadata,
    monitors,
    results,
    schema,
    set_aside,
    streams,
    tallies,
)
from pbm.io.writer_lock import WriterLock
from pbm.records.alarm import Alarm
from pbm.records.result import Result
from pbm.records.snapshot import LATE, RERUN, Batch, Earlier, Edition, Snapshot
from pbm.records.stream import StreamName


class Store:
    """The store of a laboratory, opened to write; a context manager.

    Raises
    ------
    FeedError
        Here and from every method: another process writes to the store, or the database cannot go on. Nothing of a batch is then kept.
    """

    def __init__(self, path: Path) -> None:
        self.path = path
        self._lock = WriterLock(path)
        try:
            with told(path):
                self._connection = writing_engine(path).connect()
                self._prepare()
        except BaseException:
            self._lock.release()
            raise

    def __enter__(self) -> "Store":
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the database and let others write."""
        self._connection.close()
        self._connection.engine.dispose()
        self._lock.release()

    def _prepare(self) -> None:
        with self._connection.begin():
            if not inspect(self._connection).has_table("schema"):
                metadata.create_all(self._connection)
                self._connection.execute(insert(schema).values(version=SCHEMA_VERSION))
            store_rows.check_version(self._connection, self.path)
            self._streams = {
                StreamName(one.analyte, one.analyser): one.id for one in self._connection.execute(select(streams))
            }
            self._feeds = {one.source: one.id for one in self._connection.execute(select(feeds))}
            self._last = {table: self._highest(table) for table in (results, alarms, set_aside)}

    def _highest(self, table: Table) -> int:
        number = next(iter(table.primary_key))
        return int(self._connection.execute(select(func.coalesce(func.max(number), 0))).scalar_one())

    # What a batch asks before it is kept

    def position(self, source: str) -> str:
        """Where a feed goes on; "" for a feed never read."""
        with told(self.path), self._connection.begin():
            return self._connection.execute(select(feeds.c.position).where(feeds.c.source == source)).scalar() or ""

    def earlier(self, some: Iterable[Result]) -> Earlier:
        """What is kept of the same specimens and patients; of results without a specimen, what is kept of the same moment."""
        asked = list(some)
        found = Earlier()
        with told(self.path), self._connection.begin():
            if named := {one.specimen for one in asked if one.specimen}:
                self._find_runs(named, found)
            if unnamed := {one.time for one in asked if not one.specimen}:
                self._find_unnamed(unnamed, found)
            if patients := {one.patient for one in asked if one.patient}:
                self._find_visits(patients, found)
        return found

    def _find_runs(self, specimens: set[str], found: Earlier) -> None:
        r, names = results.c, {number: name for name, number in self._streams.items()}
        asked = select(r.stream, r.specimen, r.time, r.value, r.censor, r.left_out).where(
            NAMED, r.specimen.in_(specimens)
        )
        for stream, specimen, time, value, censor, left_out in self._connection.execute(asked):
            runs = found.runs.setdefault((names[stream], specimen), {})
            runs[time, value, censor] = left_out != RERUN

    def _find_unnamed(self, times: set[int], found: Earlier) -> None:
        r, names = results.c, {number: name for name, number in self._streams.items()}
        sources = {number: source for source, number in self._feeds.items()}
        asked = select(r.stream, r.time, r.value, r.censor, r.feed, r.edition).where(UNNAMED, r.time.in_(times))
        for stream, time, value, censor, feed, edition in self._connection.execute(asked):
            editions = found.unnamed.setdefault((names[stream], time, value, censor), set())
            editions.add(Edition(sources[feed], edition))

    def _find_visits(self, patients: set[str], found: Earlier) -> None:
        r, names = results.c, {number: name for name, number in self._streams.items()}
        # One that came too late counts for its patient all the same.
        counted = r.left_out.in_(("", LATE))
        for stream, patient, time in self._connection.execute(
            select(r.stream, r.patient, r.time).where(VISITS, r.patient.in_(patients), counted)
        ):
            found.visits.setdefault((names[stream], patient), []).append(time)

    # What is kept

    def keep(self, batch: Batch) -> None:
        """Keep a batch: all of it, on the disk, or (with an error) nothing of it; the same batch may then be tried again."""
        with told(self.path):
            with self._connection.begin():
                known = self._with_streams(one.result.stream for one in batch.results)
                feeds_known = self._with_positions(batch.positions)
                self._insert_results(batch, known, feeds_known)
                aside = [item._asdict() | {"feed": feeds_known[source]} for source, item in batch.set_aside]
                self._insert_numbered(set_aside, aside)
                self._add_to_tallies(batch.tallies)
                self._update_states(batch, known)
            self._streams, self._feeds = known, feeds_known
            self._last = {
                results: self._last[results] + len(batch.results),
                alarms: self._last[alarms] + len(batch.alarms),
                set_aside: self._last[set_aside] + len(batch.set_aside),
            }

    def _insert_results(self, batch: Batch, known: Mapping[StreamName, int], feeds_known: Mapping[str, int]) -> None:
        rows = [
            {
                "stream": known[one.stream],
                "specimen": one.specimen,
                "time": one.time,
                "value": one.value,
                "censor": one.censor,
                "ward": one.ward,
                "patient": one.patient,
                "left_out": left_out,
                "feed": feeds_known[edition.source],
                "edition": edition.number,
            }
            for one, left_out, edition in batch.results
        ]
        first = self._insert_numbered(results, rows)
        raised = [
            store_rows.alarm_row(alarm) | {"stream": known[alarm.stream], "seq": first + place}
            for place, alarm in batch.alarms
        ]
        self._insert_numbered(alarms, raised)

    def _insert_numbered(self, table: Table, rows: list[dict[str, Any]]) -> int:
        """Insert rows under the next numbers; the number of the first."""
        number, first = next(iter(table.primary_key)).name, self._last[table] + 1
        for place, row in enumerate(rows):
            row[number] = first + place
        if rows:
            self._connection.execute(insert(table), rows)
        return first

    def _with_streams(self, named: Iterable[StreamName]) -> dict[StreamName, int]:
        new = [name for name in dict.fromkeys(named) if name not in self._streams]
        if not new:
            return self._streams
        numbers = dict(zip(new, range(len(self._streams) + 1, len(self._streams) + len(new) + 1), strict=True))
        rows = [
            {"id": number, "analyte": name.analyte, "analyser": name.analyser, "newest": "[]"}
            for name, number in numbers.items()
        ]
        self._connection.execute(insert(streams), rows)
        return self._streams | numbers

    def _with_positions(self, positions: Mapping[str, str]) -> dict[str, int]:
        known = dict(self._feeds)
        for source, position in positions.items():
            if source in known:
                self._connection.execute(update(feeds).where(feeds.c.id == known[source]).values(position=position))
            else:
                known[source] = len(known) + 1
                self._connection.execute(insert(feeds).values(id=known[source], source=source, position=position))
        return known

    def _add_to_tallies(self, counts: Mapping[str, int]) -> None:
        for reason, count in counts.items():
            added = update(tallies).where(tallies.c.reason == reason).values(count=tallies.c.count + count)
            if self._connection.execute(added).rowcount == 0:
                self._connection.execute(insert(tallies).values(reason=reason, count=count))

    def _update_states(self, batch: Batch, known: Mapping[StreamName, int]) -> None:
        if batch.snapshots:
            rows = [
                store_rows.snapshot_row(one) | {"of": known[one.stream], "nth": one.monitor} for one in batch.snapshots
            ]
            self._connection.execute(_UPDATE_MONITOR, rows)
            times = [{"of": known[name], "newest": json.dumps(newest)} for name, newest in batch.newest.items()]
            self._connection.execute(_UPDATE_STREAM, times)

    # How a watch begins

    def plan_in_force(self) -> str:
        """SHA-256 of the plan under which the store was last written; "" if it never was."""
        with told(self.path), self._connection.begin():
            return (
                self._connection.execute(select(audit.c.plan_after).order_by(audit.c.id.desc()).limit(1)).scalar() or ""
            )

    def snapshots(self) -> list[Snapshot]:
        """Every monitor as it was kept."""
        with told(self.path), self._connection.begin():
            return store_rows.snapshots(self._connection)

    def open_alarms(self) -> list[Alarm]:
        """The alarm of every monitor whose episode is still open, the newest last."""
        with told(self.path), self._connection.begin():
            return store_rows.open_alarms(self._connection)

    def recent_results(self, name: StreamName, count: int) -> list[Result]:
        """The last results of a stream that counted, in order of arrival."""
        with told(self.path), self._connection.begin():
            return store_rows.recent_results(self._connection, name, count)

    def newest_times(self) -> dict[StreamName, list[int]]:
        """The newest times that the monitors of each stream have taken, ascending."""
        with told(self.path), self._connection.begin():
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
        before = self.plan_in_force()
        with told(self.path):
            with self._connection.begin():
                known = self._with_streams(one.stream for one in states)
                self._connection.execute(delete(monitors))
                if states:
                    rows = [store_rows.snapshot_row(one) | {"stream": known[one.stream]} for one in states]
                    self._connection.execute(insert(monitors), rows)
                said = {"at": at, "what": what, "plan_before": before, "plan_after": plan_sha256, "detail": detail}
                self._connection.execute(insert(audit), said | {"id": self._highest(audit) + 1})
            self._streams = known


_UPDATE_MONITOR = update(monitors).where(monitors.c.stream == bindparam("of"), monitors.c.monitor == bindparam("nth"))
_UPDATE_STREAM = update(streams).where(streams.c.id == bindparam("of"))
