"""Rows of the store <-> records, and the questions that its writer and its readers ask alike."""

import math
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, Row, and_, func, select

from pbm.errors import FeedError
from pbm.io.store_schema import SCHEMA_VERSION, alarms, monitors, results, schema, streams
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.result import Result
from pbm.records.snapshot import Snapshot
from pbm.records.stream import StreamName

_ESTIMATE = ("onset", "onset_low", "onset_high", "results", "size", "size_in_tea", "expected_unreliable")


def check_version(connection: Connection, path: Path) -> None:
    """Refuse a store of another layout.

    Raises
    ------
    FeedError
        If the layout is not the one this version writes.
    """
    found = connection.execute(select(schema.c.version)).scalar()
    if found != SCHEMA_VERSION:
        raise FeedError(
            f"The store {path} has layout {found}, and this version of pbm writes layout {SCHEMA_VERSION}. Use the version of pbm that "
            "wrote it, or move the store away to start afresh."
        )


def recent_results(connection: Connection, name: StreamName, count: int) -> list[Result]:
    """The last results of a stream that counted, in order of arrival."""
    asked = (
        select(results)
        .join(streams, streams.c.id == results.c.stream)
        .where(streams.c.analyte == name.analyte, streams.c.analyser == name.analyser, results.c.left_out == "")
        .order_by(results.c.seq.desc())
        .limit(count)
    )
    rows = connection.execute(asked).all()
    return [
        Result(row.time, name, row.value, row.censor, row.specimen, row.ward, row.patient) for row in reversed(rows)
    ]


def last_alarms(connection: Connection, count: int) -> list[Alarm]:
    """The last alarms, the newest last."""
    asked = (
        select(alarms, streams.c.analyte, streams.c.analyser).join(streams).order_by(alarms.c.id.desc()).limit(count)
    )
    return [_alarm(row) for row in reversed(connection.execute(asked).all())]


def open_alarms(connection: Connection) -> list[Alarm]:
    """The alarm of every monitor whose episode is still open, the newest last."""
    newest = select(func.max(alarms.c.id)).group_by(alarms.c.stream, alarms.c.monitor)
    same = and_(monitors.c.stream == alarms.c.stream, monitors.c.monitor == alarms.c.monitor, monitors.c.episode != 0)
    asked = select(alarms, streams.c.analyte, streams.c.analyser).join(streams).join(monitors, same)
    rows = connection.execute(asked.where(alarms.c.id.in_(newest)).order_by(alarms.c.id)).all()
    return [_alarm(row) for row in rows]


def snapshots(connection: Connection) -> list[Snapshot]:
    """Every monitor as it stands."""
    asked = (
        select(monitors, streams.c.analyte, streams.c.analyser)
        .join(streams)
        .order_by(monitors.c.stream, monitors.c.monitor)
    )
    return [_snapshot(row) for row in connection.execute(asked)]


def alarm_row(alarm: Alarm) -> dict[str, Any]:
    """The columns of an alarm, but for its number, its stream's and its result's."""
    estimate = {name: getattr(alarm.estimate, name, None) for name in _ESTIMATE}
    own = (
        "monitor",
        "time",
        "specimen",
        "side",
        "statistic",
        "value",
        "shown",
        "shown_limit",
        "last_control",
        "plan_sha256",
    )
    return {name: getattr(alarm, name) for name in own} | {"control_limit": alarm.limit} | estimate


def snapshot_row(snapshot: Snapshot) -> dict[str, Any]:
    """The columns of a monitor, but for its stream's number."""
    own = ("monitor", "settings", "state", "taken", "admitted", "needed", "episode")
    value = None if math.isnan(snapshot.value) else snapshot.value
    return {name: getattr(snapshot, name) for name in own} | {"value": value}


def _alarm(row: Row[Any]) -> Alarm:
    return Alarm(
        stream=StreamName(row.analyte, row.analyser),
        monitor=row.monitor,
        time=row.time,
        specimen=row.specimen,
        side=row.side,
        statistic=row.statistic,
        value=row.value,
        limit=row.control_limit,
        shown=row.shown,
        shown_limit=row.shown_limit,
        estimate=None if row.onset is None else OnsetEstimate(**{name: row._mapping[name] for name in _ESTIMATE}),
        last_control=row.last_control,
        plan_sha256=row.plan_sha256,
    )


def _snapshot(row: Row[Any]) -> Snapshot:
    return Snapshot(
        stream=StreamName(row.analyte, row.analyser),
        monitor=row.monitor,
        settings=row.settings,
        state=row.state,
        taken=row.taken,
        admitted=row.admitted,
        needed=row.needed,
        value=math.nan if row.value is None else row.value,
        episode=row.episode,
    )
