"""Whether a store is whole: the file itself, what refers to what, the account of what feeds delivered, alarms, and the chain of the audit.

Each check asks one question at a time and holds no transaction between two, so that a running watch is not held up. What no check can show
stands in docs/guide/store.md.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from sqlalchemy import Connection, Row, and_, exists, func, select

from pbm.errors import FeedError
from pbm.io import store_audit
from pbm.io.store_engine import reading_engine
from pbm.io.store_errors import told
from pbm.io.store_place import Place
from pbm.io.store_schema import alarms, audit, audit_head, feeds, results, set_aside, tallies
from pbm.records.snapshot import DUPLICATE

_MOST = 20  # mistakes told of one kind
_STEP = 5_000


@dataclass(frozen=True)
class Checked:
    """What one check found.

    Attributes
    ----------
    what
        Its name.
    told
        What was looked at, in words.
    wrong
        Every mistake, or the first of them; none if all is well.
    """

    what: str
    told: str
    wrong: tuple[str, ...] = ()


def check_store(place: Place, head: str = "") -> Iterator[Checked]:
    """Check a store, one thing after the other.

    Parameters
    ----------
    place
        Of an existing store.
    head
        A hash of the audit that was noted earlier, or its first digits; "" for none.
    """
    checks: tuple[tuple[str, Callable[[Connection], Checked]], ...] = (
        ("database", _database),
        ("references", _references),
        ("account", _account),
        ("reasons", _reasons),
        ("alarms", _alarms),
        ("audit", lambda connection: _audit(connection, head)),
    )
    engine = reading_engine(place)
    for name, check in checks:
        try:
            with told(place), engine.connect() as connection:
                yield check(connection)
        except FeedError as error:
            yield Checked(name, "could not be read", (str(error),))


def _database(connection: Connection) -> Checked:
    if connection.dialect.name != "sqlite":
        return Checked("database", "PostgreSQL looks after its own files (its pg_amcheck checks them)")
    said = list(connection.exec_driver_sql(f"PRAGMA integrity_check({_MOST})").scalars())
    pages = connection.exec_driver_sql("PRAGMA page_count").scalar_one()
    return Checked("database", f"{pages:,} pages of SQLite", tuple(said) if said != ["ok"] else ())


def _references(connection: Connection) -> Checked:
    if connection.dialect.name != "sqlite":
        return Checked("references", "PostgreSQL keeps to them with every change")
    wrong = connection.exec_driver_sql("PRAGMA foreign_key_check").fetchmany(_MOST)
    lines = tuple(
        f"row {row} of {table} refers to a row of {parent} that is not there" for table, row, parent, _ in wrong
    )
    return Checked("references", "every row that another refers to is there", lines)


def _account(connection: Connection) -> Checked:
    """Results + set aside + duplicates + removed = delivered; one statement, so that a running watch cannot come in between."""
    duplicates = select(func.coalesce(func.sum(tallies.c.count), 0)).where(tallies.c.reason == DUPLICATE)
    row = connection.execute(
        select(
            select(func.count()).select_from(results).scalar_subquery().label("results"),
            select(func.count()).select_from(set_aside).scalar_subquery().label("aside"),
            duplicates.scalar_subquery().label("duplicates"),
            select(func.coalesce(func.sum(feeds.c.removed), 0)).scalar_subquery().label("removed"),
            select(func.coalesce(func.sum(feeds.c.delivered), 0)).scalar_subquery().label("delivered"),
        )
    ).one()
    found = row.results + row.aside + row.duplicates + row.removed
    said = (
        f"{row.results:,} results + {row.aside:,} set aside + {row.duplicates:,} duplicates + {row.removed:,} removed as too old = "
        f"{found:,}; the feeds delivered {row.delivered:,}"
    )
    return Checked(
        "account", said, () if found == row.delivered else (f"{abs(found - row.delivered):,} do not add up",)
    )


def _reasons(connection: Connection) -> Checked:
    """No reason is counted less often than it is kept: of results that no monitor may take, and of pieces set aside."""
    held = (
        select(results.c.left_out.label("reason")).where(results.c.left_out != "").union_all(select(set_aside.c.reason))
    )
    rows = held.subquery()
    kept = select(rows.c.reason, func.count().label("kept")).group_by(rows.c.reason).subquery()
    counted = func.coalesce(tallies.c.count, 0)
    asked = select(kept.c.reason, kept.c.kept, counted.label("counted")).outerjoin(
        tallies, tallies.c.reason == kept.c.reason
    )
    found = connection.execute(asked.order_by(kept.c.reason)).all()
    wrong = tuple(
        f'"{one.reason}" is kept {one.kept:,} times and counted {one.counted:,}'
        for one in found
        if one.kept > one.counted
    )
    return Checked("reasons", f"{len(found)} reasons for what was left out or set aside", wrong)


def _alarms(connection: Connection) -> Checked:
    count = connection.execute(select(func.count()).select_from(alarms)).scalar_one()
    same = and_(results.c.seq == alarms.c.seq, results.c.stream == alarms.c.stream, results.c.time == alarms.c.time)
    without = select(alarms.c.id, alarms.c.seq).where(~exists().where(same)).order_by(alarms.c.id).limit(_MOST)
    wrong = tuple(
        f"alarm {number} is about result {seq}, which is not there" for number, seq in connection.execute(without)
    )
    return Checked("alarms", f"each of {count:,} has the result that it is about", wrong)


def _audit(connection: Connection, noted: str) -> Checked:
    end = connection.execute(select(audit_head)).first()
    before, plan, number, wrong, met = store_audit.FIRST, "", 0, [], not noted
    for entry in _entries(connection):
        number += 1
        fields = dict(entry._mapping)
        if entry.id != number:
            wrong.append(f"entry {number} is missing; the next one is {entry.id}")
            number = entry.id
        if entry.hash != store_audit.entry_hash(before, fields):
            wrong.append(f'entry {entry.id} ("{entry.what}") or the one before it is not as it was written')
        if entry.plan_before != plan:
            wrong.append(f"entry {entry.id} does not go on from the plan of the one before it")
        before, plan = entry.hash, entry.plan_after
        met = met or entry.hash.startswith(noted)
        if end is not None and entry.id == end.entries and entry.hash != end.hash:
            wrong.append(f"entry {entry.id} has another hash than the one that was kept of it")
    if end is None and number:
        wrong.append("where it ends is not kept any more")
    if end is not None and number < end.entries:
        wrong.append(f"entries {number + 1} to {end.entries} are missing at its end")
    if not met:
        wrong.append(f"no entry has the hash {noted} that was noted")
    entries = f"{number:,} {'entry' if number == 1 else 'entries'}"
    return Checked("audit", f"{entries}, the last with hash {before or 'none'}", tuple(wrong[:_MOST]))


def _entries(connection: Connection) -> Iterator[Row[tuple[int, int, str, str, str, str, str]]]:
    last = 0
    while rows := connection.execute(select(audit).where(audit.c.id > last).order_by(audit.c.id).limit(_STEP)).all():
        yield from rows
        last = rows[-1].id
