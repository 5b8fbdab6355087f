"""The audit of a store, chained: no entry can be changed, put in or taken out without every later hash changing too.

    hash = SHA-256(hash of the entry before, fields of this entry)

The last hash is kept a second time, so that a cut end is noticed.
"""

import hashlib
import json
from typing import Any

from sqlalchemy import Connection, insert, select, update

from pbm.io.store_schema import audit, audit_head

FIRST = ""  # what the first entry has for a hash before it
_COVERED = ("id", "at", "what", "plan_before", "plan_after", "detail")


def entry_hash(before: str, entry: dict[str, Any]) -> str:
    """The hash of an entry, in hexadecimal.

    Parameters
    ----------
    before
        The hash of the entry before it.
    entry
        Its columns.
    """
    covered = json.dumps([before, *(entry[name] for name in _COVERED)], ensure_ascii=False, separators=(",", ":"))
    return hashlib.sha256(covered.encode("utf-8", "surrogatepass")).hexdigest()


def append(connection: Connection, at: int, what: str, detail: str, plan_after: str | None = None) -> None:
    """Append an entry, in the transaction that does what it tells.

    Parameters
    ----------
    at
        Now, UTC microseconds.
    what, detail
        What is done, in words.
    plan_after
        SHA-256 of the plan in force from now on; without it the plan stays.
    """
    newest = select(audit.c.id, audit.c.hash, audit.c.plan_after).order_by(audit.c.id.desc()).limit(1)
    last = connection.execute(newest).first()
    number, before, plan = (last.id, last.hash, last.plan_after) if last else (0, FIRST, "")
    entry: dict[str, Any] = {
        "id": number + 1,
        "at": at,
        "what": what,
        "plan_before": plan,
        "plan_after": plan if plan_after is None else plan_after,
        "detail": detail,
    }
    entry["hash"] = entry_hash(before, entry)
    connection.execute(insert(audit), entry)
    set_head(connection, number + 1, entry["hash"])


def set_head(connection: Connection, entries: int, last: str) -> None:
    """Keep where the audit ends."""
    row = {"entries": entries, "hash": last}
    if connection.execute(update(audit_head).values(row)).rowcount == 0:
        connection.execute(insert(audit_head), row)
