"""A batch -> rows of the store, within the transaction of its caller: results, alarms, states, positions, and all that came with them."""

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, Table, bindparam, func, insert, select, update

from pbm.io import store_audit, store_rows
from pbm.io.store_prepared import Prepared
from pbm.io.store_schema import (
    alarms,
    annotations,
    events,
    feeds,
    messages,
    monitors,
    notices,
    results,
    set_aside,
    streams,
    tallies,
)
from pbm.records.event import LabEvent
from pbm.records.notice import Notice
from pbm.records.snapshot import Batch, Snapshot
from pbm.records.stream import StreamName

_NUMBERED = (results, alarms, set_aside, annotations, events, notices)


@dataclass(frozen=True)
class Numbers:
    """The numbers that stand for streams and feeds, and the last one given in every table that counts its rows."""

    streams: Mapping[StreamName, int]
    feeds: Mapping[str, int]
    last: Mapping[Table, int]

    @classmethod
    def read(cls, connection: Connection) -> "Numbers":
        """As the store holds them."""
        return cls(
            {StreamName(one.analyte, one.analyser): one.id for one in connection.execute(select(streams))},
            {one.source: one.id for one in connection.execute(select(feeds))},
            {table: _highest(connection, table) for table in _NUMBERED},
        )


def _highest(connection: Connection, table: Table) -> int:
    number = next(iter(table.primary_key))
    return int(connection.execute(select(func.coalesce(func.max(number), 0))).scalar_one())


class BatchRows:
    """Writes into one transaction.

    Parameters
    ----------
    connection
        In a transaction.
    known
        Numbers until now. They stay as they are: a transaction may fail.
    """

    def __init__(self, connection: Connection, known: Numbers) -> None:
        self._connection = connection
        self._streams, self._feeds, self._last = dict(known.streams), dict(known.feeds), dict(known.last)

    @property
    def numbers(self) -> Numbers:
        """Numbers from now on, once the transaction is kept."""
        return Numbers(self._streams, self._feeds, self._last)

    def write(self, batch: Batch) -> None:
        """Everything of a batch."""
        before = self._last[results]
        self._number_streams(
            [*(one.result.stream for one in batch.results), *(one.stream for one in batch.annotations)]
        )
        self._move_positions(batch.positions, batch.delivered)
        self._insert_results(batch)
        self._insert_alarms(batch, before + 1)
        self._insert_set_aside(batch)
        self._insert_annotations(batch)
        self._insert_messages(batch)
        self._insert_events(batch.events, before)
        self._write_notices(batch.notices)
        self._add_to_tallies(batch.tallies)
        self._update_states(batch)

    def replace_states(self, states: Sequence[Snapshot]) -> None:
        """The monitors of a plan in the place of those kept."""
        self._number_streams(one.stream for one in states)
        self._connection.execute(monitors.delete())
        if states:
            rows = [store_rows.snapshot_row(one) | {"stream": self._streams[one.stream]} for one in states]
            self._connection.execute(insert(monitors), rows)

    def _insert_results(self, batch: Batch) -> None:
        rows = [
            {
                "stream": self._streams[one.stream],
                "specimen": one.specimen,
                "time": one.time,
                "value": one.value,
                "censor": one.censor,
                "ward": one.ward,
                "patient": one.patient,
                "sex": one.sex,
                "age": one.age,
                "left_out": left_out,
                "feed": self._feeds[edition.source],
                "edition": edition.number,
            }
            for one, left_out, edition in batch.results
        ]
        self._insert_numbered(results, rows)

    def _insert_alarms(self, batch: Batch, first: int) -> None:
        rows = [
            store_rows.alarm_row(alarm) | {"stream": self._streams[alarm.stream], "seq": first + place}
            for place, alarm in batch.alarms
        ]
        self._insert_numbered(alarms, rows)

    def _insert_set_aside(self, batch: Batch) -> None:
        self._insert_numbered(
            set_aside, [item._asdict() | {"feed": self._feeds[source]} for source, item in batch.set_aside]
        )

    def _insert_annotations(self, batch: Batch) -> None:
        rows = [
            store_rows.annotation_row(one) | {"stream": self._streams[one.stream], "feed": self._feeds[one.source]}
            for one in batch.annotations
        ]
        self._insert_numbered(annotations, rows)

    def _insert_messages(self, batch: Batch) -> None:
        if batch.messages:
            rows = [store_rows.message_row(one) | {"seq": self._last[results]} for one in batch.messages]
            _INSERT[messages].run(self._connection, rows)

    def _insert_events(self, given: Sequence[tuple[int, LabEvent]], before: int) -> None:
        self._insert_numbered(events, [store_rows.event_row(one) | {"seq": before + place} for place, one in given])
        for _, event in given:
            store_audit.append(self._connection, event.at, event.kind, store_rows.event_in_words(event))

    def _write_notices(self, given: Sequence[Notice]) -> None:
        for one in given:
            row = store_rows.notice_row(one)
            same = [notices.c[name] == row[name] for name in ("time", "kind", "analyte", "analyser")]
            if self._connection.execute(update(notices).where(*same).values(row)).rowcount == 0:
                self._insert_numbered(notices, [row])

    def _insert_numbered(self, table: Table, rows: list[dict[str, Any]]) -> None:
        """Insert rows under the next numbers."""
        number, first = next(iter(table.primary_key)).name, self._last[table] + 1
        for place, row in enumerate(rows):
            row[number] = first + place
        if rows:
            _INSERT[table].run(self._connection, rows)
        self._last[table] += len(rows)

    def _number_streams(self, named: Iterable[StreamName]) -> None:
        new = [name for name in dict.fromkeys(named) if name not in self._streams]
        for name in new:
            self._streams[name] = len(self._streams) + 1
        if new:
            rows = [
                {"id": self._streams[name], "analyte": name.analyte, "analyser": name.analyser, "newest": "[]"}
                for name in new
            ]
            self._connection.execute(insert(streams), rows)

    def _move_positions(self, positions: Mapping[str, str], delivered: Mapping[str, int]) -> None:
        for source, position in positions.items():
            count = delivered.get(source, 0)
            if source in self._feeds:
                moved = {"of": self._feeds[source], "position": position, "count": count}
                _MOVE_FEED.run(self._connection, [moved])
            else:
                self._feeds[source] = len(self._feeds) + 1
                row = {"id": self._feeds[source], "source": source, "position": position}
                self._connection.execute(insert(feeds), row | {"delivered": count, "removed": 0})

    def _add_to_tallies(self, counts: Mapping[str, int]) -> None:
        for reason, count in counts.items():
            if _ADD_TO_TALLY.run(self._connection, [{"of": reason, "more": count}]) == 0:
                self._connection.execute(insert(tallies).values(reason=reason, count=count))

    def _update_states(self, batch: Batch) -> None:
        if batch.snapshots:
            rows = [
                store_rows.snapshot_row(one) | {"of": self._streams[one.stream], "nth": one.monitor}
                for one in batch.snapshots
            ]
            _UPDATE_MONITOR.run(self._connection, rows)
        if batch.newest:
            times = [{"of": self._streams[name], "newest": json.dumps(newest)} for name, newest in batch.newest.items()]
            _UPDATE_STREAM.run(self._connection, times)


_INSERT = {table: Prepared(insert(table)) for table in (*_NUMBERED, messages)}
_MOVE_FEED = Prepared(
    update(feeds)
    .where(feeds.c.id == bindparam("of"))
    .values(position=bindparam("position"), delivered=feeds.c.delivered + bindparam("count"))
)
_ADD_TO_TALLY = Prepared(
    update(tallies).where(tallies.c.reason == bindparam("of")).values(count=tallies.c.count + bindparam("more"))
)
_UPDATE_MONITOR = Prepared(
    update(monitors).where(monitors.c.stream == bindparam("of"), monitors.c.monitor == bindparam("nth"))
)
_UPDATE_STREAM = Prepared(update(streams).where(streams.c.id == bindparam("of")))
