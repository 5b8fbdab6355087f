"""What is too old is removed from a store, a little at a time, between batches; nothing that the watch needs is.

Of each stream the last `KEPT_RESULTS` that count stay however old they are (states, onsets and reruns need far fewer), and so does every
result that an alarm is about, and the last `KEPT_ASIDE` pieces set aside. Alarms, events, notices, annotations and audit stay for good.
Results lie in order of arrival, which is nearly that of time: a stream is looked through from its begin until a step ends in a result
that is young enough to stay.
"""

from dataclasses import dataclass, replace
from datetime import UTC, datetime
from typing import Any, Literal

from sqlalchemy import Connection, Table, bindparam, delete, func, select, tuple_, update

from pbm.io import store_audit
from pbm.io.store_schema import alarms, feeds, messages, results, set_aside, streams

KEPT_RESULTS = 1000
KEPT_ASIDE = 10_000
STEP = 250  # rows looked at in one transaction
_ROOM = 0.2  # share of a file of SQLite that may lie free before it is given back
_PAGES = 200  # given back in one transaction


@dataclass(frozen=True, slots=True)
class Sweep:
    """One removal of what is older than a time, and how far it has come.

    Attributes
    ----------
    before
        UTC microseconds.
    stage
        What it is at: results, stream by stream, then messages, pieces set aside, and the room that they leave.
    stream, last
        The stream, and what was looked at last.
    removed
        Results removed so far.
    """

    before: int
    stage: Literal["results", "messages", "set aside", "room"] = "results"
    stream: int = 0
    last: Any = 0
    removed: int = 0


def step(connection: Connection, sweep: Sweep, at: int) -> Sweep | None:
    """Go a little further, in the transaction of the caller.

    Parameters
    ----------
    sweep
        As it stands.
    at
        Now, for the audit; UTC microseconds.

    Returns
    -------
    Sweep or None
        As it stands once the transaction is kept; None when it is done.
    """
    if sweep.stage == "results":
        return _results(connection, sweep, at)
    if sweep.stage == "messages":
        return _messages(connection, sweep)
    if sweep.stage == "set aside":
        return _set_aside(connection, sweep)
    return sweep if _give_back(connection) else None


def _results(connection: Connection, sweep: Sweep, at: int) -> Sweep:
    stream = connection.execute(select(func.min(streams.c.id)).where(streams.c.id >= sweep.stream)).scalar()
    if stream is None:
        return replace(sweep, stage="messages", last=("", "", b""))
    own = results.c.stream == stream
    newest = select(results.c.seq).where(own, results.c.left_out == "").order_by(results.c.seq.desc())
    stays_from = connection.execute(newest.offset(KEPT_RESULTS - 1).limit(1)).scalar() or 0
    seen = select(results.c.seq, results.c.time).where(own, results.c.seq > sweep.last, results.c.seq < stays_from)
    rows = connection.execute(seen.order_by(results.c.seq).limit(STEP)).all()
    old = [seq for seq, time in rows if time < sweep.before]
    stay = set(connection.execute(select(alarms.c.seq).where(alarms.c.seq.in_(old))).scalars())
    doomed = [seq for seq in old if seq not in stay]
    if doomed and not sweep.removed:
        store_audit.append(connection, at, "old results removed", _told(sweep.before))
    _remove(connection, results, doomed)
    done = len(rows) < STEP or rows[-1].time >= sweep.before
    further = {"stream": stream + 1, "last": 0} if done else {"stream": stream, "last": rows[-1].seq}
    return replace(sweep, removed=sweep.removed + len(doomed), **further)


def _messages(connection: Connection, sweep: Sweep) -> Sweep:
    key = list(messages.primary_key)
    after = select(*key, messages.c.at).where(tuple_(*key) > tuple_(*sweep.last)).order_by(*key)
    rows = connection.execute(after.limit(STEP)).all()
    if old := [{f"old_{name}": row._mapping[name] for name in _KEY} for row in rows if row.at < sweep.before]:
        connection.execute(_DELETE_MESSAGE, old)
    if len(rows) < STEP:
        return replace(sweep, stage="set aside")
    return replace(sweep, last=tuple(rows[-1][: len(key)]))


_KEY = ("sender", "control_id", "sha256")
_DELETE_MESSAGE = delete(messages).where(*(messages.c[name] == bindparam(f"old_{name}") for name in _KEY))


def _set_aside(connection: Connection, sweep: Sweep) -> Sweep:
    newest = connection.execute(select(func.coalesce(func.max(set_aside.c.id), 0))).scalar_one()
    old = select(set_aside.c.id).where(set_aside.c.id <= newest - KEPT_ASIDE).order_by(set_aside.c.id).limit(STEP)
    doomed = list(connection.execute(old).scalars())
    _remove(connection, set_aside, doomed)
    return sweep if len(doomed) == STEP else replace(sweep, stage="room")


def _remove(connection: Connection, table: Table, numbers: list[int]) -> None:
    """Remove rows by their numbers, and count them in their feeds."""
    if not numbers:
        return
    these = next(iter(table.primary_key)).in_(numbers)
    of_feeds = select(table.c.feed, func.count()).where(these).group_by(table.c.feed)
    for feed, count in connection.execute(of_feeds).all():
        connection.execute(update(feeds).where(feeds.c.id == feed).values(removed=feeds.c.removed + count))
    connection.execute(delete(table).where(these))


def _told(before: int) -> str:
    day = datetime.fromtimestamp(before / 1e6, UTC).isoformat(timespec="seconds")
    return f"before {day}, but for the last {KEPT_RESULTS:,} of each stream and those of alarms"


def _give_back(connection: Connection) -> bool:
    """Give free room in a file of SQLite back to the disk; whether there may be more. PostgreSQL sees to its own room."""
    if connection.dialect.name != "sqlite":
        return False
    free, pages = (_pragma(connection, name) for name in ("freelist_count", "page_count"))
    if free <= _ROOM * pages:
        return False
    for _ in range(_PAGES):  # the driver takes one step of a statement without rows, and a step is a page
        connection.exec_driver_sql("PRAGMA incremental_vacuum(1)")
    return _pragma(connection, "freelist_count") < free


def _pragma(connection: Connection, name: str) -> int:
    return int(connection.exec_driver_sql(f"PRAGMA {name}").scalar_one())
