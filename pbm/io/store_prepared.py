"""Statements of SQLAlchemy Core that run with every batch: on SQLite written out once and handed to the driver, elsewhere run as they are.

To bind and run a statement by Core takes seven times as long as SQLite itself, and a sender that waits for its answer waits for nine.
Types of SQLite need no conversion, so the driver gets the same values. Its errors come out as SQLAlchemy's, without the parameters, which
are results.
"""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import AbstractContextManager, contextmanager, nullcontext
from operator import itemgetter
from typing import Any

from sqlalchemy import Connection, Executable, Select
from sqlalchemy.exc import DBAPIError
from sqlalchemy.sql.compiler import SQLCompiler

Rows = Sequence[Mapping[str, Any]]


class Prepared:
    """A statement that changes rows.

    Parameters
    ----------
    statement
        An insert or update whose values are bound by name.
    """

    def __init__(self, statement: Executable) -> None:
        self._statement = statement
        self._written: dict[frozenset[str], tuple[str, itemgetter[str]]] = {}

    def run(self, connection: Connection, rows: Rows) -> int:
        """Run it for some rows with the same columns; how many rows it changed."""
        if connection.dialect.name != "sqlite":
            return connection.execute(self._statement, list(rows)).rowcount
        text, values = self._written.get(key := frozenset(rows[0])) or self._write(connection, key)
        with driver_cursor(connection) as cursor:
            return int(cursor.executemany(text, map(values, rows)).rowcount)

    def _write(self, connection: Connection, names: frozenset[str]) -> tuple[str, Any]:
        compiled = self._statement.compile(dialect=connection.dialect, column_keys=sorted(names))  # type: ignore[attr-defined]
        assert isinstance(compiled, SQLCompiler) and compiled.positiontup
        order = compiled.positiontup
        values = itemgetter(*order) if len(order) > 1 else lambda row: (row[order[0]],)
        self._written[names] = (compiled.string, values)  # type: ignore[assignment]
        return self._written[names]


class PreparedQuestion:
    """A question about lists of values.

    Parameters
    ----------
    question
        Its lists are parameters that expand.
    """

    def __init__(self, question: Select[Any]) -> None:
        self._question = question
        self._written: dict[tuple[int, ...], tuple[str, tuple[Any, ...]]] = {}

    def ask(self, connection: Connection, **lists: Sequence[Any]) -> Sequence[Sequence[Any]]:
        """The rows that it finds; no list may be empty."""
        if connection.dialect.name != "sqlite":
            return connection.execute(self._question, lists).all()
        # A list is filled up with its last value to one of few lengths, so that few texts are written.
        filled = {name: [*one, *[one[-1]] * (_length(len(one)) - len(one))] for name, one in lists.items()}
        lengths = tuple(map(len, filled.values()))
        text, places = self._written.get(lengths) or self._write(connection, lengths, filled)
        values = [filled[place.name][place.nth] if isinstance(place, _Place) else place for place in places]
        with driver_cursor(connection) as cursor:
            rows: Sequence[Sequence[Any]] = cursor.execute(text, values).fetchall()
            return rows

    def _write(
        self, connection: Connection, lengths: tuple[int, ...], lists: Mapping[str, Sequence[Any]]
    ) -> tuple[str, tuple[Any, ...]]:
        compiled = self._question.compile(dialect=connection.dialect)
        assert isinstance(compiled, SQLCompiler)
        places = {name: [_Place(name, nth) for nth in range(len(one))] for name, one in lists.items()}
        expanded = compiled.construct_expanded_state(places)
        self._written[lengths] = (expanded.statement, tuple(expanded.positional_parameters))
        return self._written[lengths]


class _Place:
    """Where a value of a list stands among the parameters."""

    __slots__ = ("name", "nth")

    def __init__(self, name: str, nth: int) -> None:
        self.name, self.nth = name, nth


def asking(connection: Connection) -> AbstractContextManager[object]:
    """What questions are asked in: on SQLite nothing, since who asks is the only one that writes; elsewhere a transaction."""
    return nullcontext() if connection.dialect.name == "sqlite" else connection.begin()


def _length(count: int) -> int:
    """The next power of two."""
    return 1 << (count - 1).bit_length()


@contextmanager
def driver_cursor(connection: Connection) -> Iterator[Any]:
    """A cursor of the driver, whose errors come out as those of the engine do."""
    cursor = connection.connection.cursor()
    error_class = connection.dialect.loaded_dbapi.Error
    try:
        yield cursor
    except error_class as error:
        raise DBAPIError.instance(None, None, error, error_class, dialect=connection.dialect) from error
    finally:
        cursor.close()
