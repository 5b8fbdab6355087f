"""A store as files for other programs: a CSV or NDJSON file for each table, in memory that does not grow with the store.

Columns are those of the tables, with analyte and analyser in place of a stream's number and the name of a feed in place of its number;
times are ISO 8601 in UTC. In CSV a text that a spreadsheet would take for a formula gets an apostrophe before it; a number never does.
Tokens of patients stay in the store.
"""

import csv
import io
import json
import math
import re
from collections.abc import Callable, Iterator, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from sqlalchemy import Connection, Engine, Table, select

from pbm.io.atomic import replacing
from pbm.io.store_engine import reading_engine
from pbm.io.store_errors import told
from pbm.io.store_place import Place
from pbm.io.store_schema import alarms, annotations, audit, events, feeds, notices, results, streams

# Results last: one that an alarm is about is then always among them, also while the watch goes on.
EXPORTED = (audit, events, notices, annotations, alarms, results)
_STEP = 5_000
_TIMES = {"time", "at", "closed_at", "onset", "onset_low", "onset_high", "last_control"}
_LEFT_IN_THE_STORE = {"patient"}
_FORMULA = ("=", "+", "-", "@", "\t", "\r", "\n")
_NUMBER = re.compile(r"[+-]?\d+([.,]\d*)?([eE][+-]?\d+)?")

Names = dict[str, dict[int, tuple[str, ...]]]
Write = Callable[[Sequence[str], Sequence[Sequence[Any]]], bytes]


def export_store(place: Place, folder: Path, *, as_json: bool) -> Iterator[tuple[Path, int]]:
    """Write the files; each with its number of rows as it is done.

    Parameters
    ----------
    place
        Of an existing store.
    folder
        Must exist; files of the same names are replaced.
    as_json
        NDJSON in place of CSV.

    Raises
    ------
    FeedError
        If the store cannot be read.
    """
    engine = reading_engine(place)
    for table in EXPORTED:
        path = folder / f"{table.name}.{'ndjson' if as_json else 'csv'}"
        with told(place):
            yield path, _write(engine, table, path, _as_json if as_json else _as_csv, head=not as_json)


def _write(engine: Engine, table: Table, path: Path, write: Write, *, head: bool) -> int:
    count = 0
    columns = [
        name
        for column in table.columns
        for name in _NAMED.get(column.name, (column.name,))
        if name not in _LEFT_IN_THE_STORE
    ]
    with replacing(path) as file:
        if head:
            file.write(write(columns, [columns]))
        for rows in _pages(engine, table):
            file.write(write(columns, rows))
            count += len(rows)
    return count


# A number of a row elsewhere -> the names that stand for it.
_NAMED = {"stream": ("analyte", "analyser"), "feed": ("source",)}


def _pages(engine: Engine, table: Table) -> Iterator[list[list[Any]]]:
    """The rows, some at a time; no transaction is held between two pages."""
    number, last = next(iter(table.primary_key)), 0
    while True:
        with engine.connect() as connection:
            rows = connection.execute(select(table).where(number > last).order_by(number).limit(_STEP)).all()
            names = _names(connection)
        if not rows:
            return
        yield [list(_cells(table, row, names)) for row in rows]
        last = rows[-1]._mapping[number.name]


def _names(connection: Connection) -> Names:
    return {
        "stream": {one.id: (one.analyte, one.analyser) for one in connection.execute(select(streams))},
        "feed": {one.id: (one.source,) for one in connection.execute(select(feeds))},
    }


def _cells(table: Table, row: Any, names: Names) -> Iterator[Any]:
    for column, value in zip(table.columns, row, strict=True):
        if column.name in _LEFT_IN_THE_STORE:
            continue
        if column.name in names:
            yield from names[column.name][value]
        elif column.name in _TIMES and value is not None:
            yield datetime.fromtimestamp(value / 1e6, UTC).isoformat().replace("+00:00", "Z")
        else:
            yield None if isinstance(value, float) and not math.isfinite(value) else value


def _as_csv(_: Sequence[str], rows: Sequence[Sequence[Any]]) -> bytes:
    text = io.StringIO()
    csv.writer(text).writerows([[_guarded(cell) for cell in row] for row in rows])
    return text.getvalue().encode("utf-8", "replace")


def _guarded(cell: Any) -> Any:
    if isinstance(cell, bool):
        return "true" if cell else "false"
    if isinstance(cell, str) and cell.startswith(_FORMULA) and not _NUMBER.fullmatch(cell):
        return f"'{cell}"
    return cell


def _as_json(columns: Sequence[str], rows: Sequence[Sequence[Any]]) -> bytes:
    lines = (json.dumps(dict(zip(columns, row, strict=True)), ensure_ascii=False) + "\n" for row in rows)
    return "".join(lines).encode("utf-8", "replace")
