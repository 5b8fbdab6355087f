"""Rows of the store <-> records, and the questions that its writer and its readers ask alike."""

import math
from collections.abc import Iterable
from dataclasses import asdict
from typing import Any

from sqlalchemy import Connection, Row, and_, func, select

from pbm.io.store_questions import ANSWERED
from pbm.io.store_schema import (
    alarms,
    annotations,
    events,
    feeds,
    heartbeat,
    monitors,
    notices,
    results,
    streams,
)
from pbm.records.alarm import Alarm, OnsetEstimate
from pbm.records.event import LabEvent
from pbm.records.message import Annotation, Answered, MessageKey
from pbm.records.notice import Heartbeat, Notice
from pbm.records.result import Result
from pbm.records.snapshot import Snapshot
from pbm.records.stream import StreamName

_ESTIMATE = ("onset", "onset_low", "onset_high", "results", "size", "size_in_tea", "expected_unreliable")


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
        Result(row.time, name, row.value, row.censor, row.specimen, row.ward, row.patient, row.sex, row.age)
        for row in reversed(rows)
    ]


def last_alarms(connection: Connection, count: int) -> list[Alarm]:
    """The last alarms, the newest last."""
    asked = (
        select(alarms, streams.c.analyte, streams.c.analyser).join(streams).order_by(alarms.c.id.desc()).limit(count)
    )
    return [_alarm(row) for row in reversed(connection.execute(asked).all())]


def alarms_after(connection: Connection, number: int) -> list[tuple[int, Alarm]]:
    """The alarms with a higher number, with their numbers, in their order; those of a watch on trial are not among them."""
    asked = select(alarms, streams.c.analyte, streams.c.analyser).join(streams).order_by(alarms.c.id)
    return [
        (row.id, _alarm(row))
        for row in connection.execute(asked.where(alarms.c.id > number, alarms.c.shadow.is_(False)))
    ]


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


def codes_answered(connection: Connection, keys: Iterable[MessageKey]) -> dict[MessageKey, str]:
    """Messages that were answered and have sender and number of one of those given, with the code; the content may be another."""
    numbers = {(one.sender, one.control_id) for one in keys}
    if not numbers:
        return {}
    senders, control_ids = (list(set(one)) for one in zip(*numbers, strict=True))
    return {
        MessageKey(sender, control_id, sha256.hex()): code
        for sender, control_id, sha256, code in ANSWERED.ask(connection, senders=senders, control_ids=control_ids)
        if (sender, control_id) in numbers
    }


def last_annotations(connection: Connection, count: int) -> list[Annotation]:
    """The last annotations, the newest last."""
    asked = select(annotations, streams.c.analyte, streams.c.analyser, feeds.c.source).join(streams).join(feeds)
    rows = connection.execute(asked.order_by(annotations.c.id.desc()).limit(count)).all()
    return [_annotation(row) for row in reversed(rows)]


def last_events(connection: Connection, count: int) -> list[LabEvent]:
    """The last laboratory events in order of arrival, the newest last."""
    rows = connection.execute(select(events).order_by(events.c.id.desc()).limit(count)).all()
    return [LabEvent(**{name: row._mapping[name] for name in _EVENT}) for row in reversed(rows)]


def last_notices(connection: Connection, count: int) -> list[Notice]:
    """The last notices, the newest last."""
    rows = connection.execute(select(notices).order_by(notices.c.id.desc()).limit(count)).all()
    return [_notice(row) for row in reversed(rows)]


def open_notices(connection: Connection) -> list[Notice]:
    """The notices that last, the newest last."""
    asked = select(notices).where(notices.c.closed_at.is_(None)).order_by(notices.c.id)
    return [_notice(row) for row in connection.execute(asked)]


def sign_of_life(connection: Connection) -> Heartbeat | None:
    """The heartbeat; None before the first."""
    row = connection.execute(select(heartbeat)).first()
    return None if row is None else Heartbeat(**row._mapping)


def message_row(message: Answered) -> dict[str, Any]:
    """The columns of a message, but for the number of a result."""
    key = message.key
    named = {"sender": key.sender, "control_id": key.control_id, "sha256": bytes.fromhex(key.sha256)}
    return named | {"code": message.code, "at": message.at}


def annotation_row(annotation: Annotation) -> dict[str, Any]:
    """The columns of an annotation, but for its number, its stream's and its feed's."""
    return {name: getattr(annotation, name) for name in ("specimen", "time", "status", "value", "at", "place")}


_EVENT = ("time", "kind", "analyte", "analyser", "detail", "source", "at", "effect")


def event_row(event: LabEvent) -> dict[str, Any]:
    """The columns of an event, but for its number and a result's."""
    return asdict(event)


def event_in_words(event: LabEvent) -> str:
    """What the audit says of an event."""
    about = f"{event.analyte}@{event.analyser}" if event.analyte else event.analyser
    return "; ".join(filter(None, (about, event.detail, event.source, event.effect)))


def notice_row(notice: Notice) -> dict[str, Any]:
    """The columns of a notice, but for its number."""
    return asdict(notice)


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
        "last_control_passed",
        "plan_sha256",
        "shadow",
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
        last_control_passed=row.last_control_passed,
        plan_sha256=row.plan_sha256,
        shadow=row.shadow,
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


def _annotation(row: Row[Any]) -> Annotation:
    return Annotation(
        stream=StreamName(row.analyte, row.analyser),
        specimen=row.specimen,
        time=row.time,
        status=row.status,
        value=row.value,
        at=row.at,
        source=row.source,
        place=row.place,
    )


def _notice(row: Row[Any]) -> Notice:
    return Notice(row.time, row.kind, row.analyte, row.analyser, row.text, row.closed_at)
