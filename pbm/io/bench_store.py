"""`bench.sqlite`: what people enter while a watch runs. Many may write, each for a moment; the watch reads it and takes it up once.

`watch.sqlite` has one writer, the watch. So a note goes here first, in a transaction of its own (journal_mode=DELETE,
synchronous=FULL), and the watch keeps with its own batch how far it has read: a note is taken up exactly once, whatever is killed when. A
file that was replaced by another one is told by its mark, and is read from its begin; an event that the watch knows already counts once
all the same.
"""

import json
import secrets
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import astuple, dataclass
from pathlib import Path
from urllib.parse import quote

from pbm.errors import InputError
from pbm.records.event import EventKind, LabEvent
from pbm.records.reading import Chunk

NOTES = "bench notes"
MOST = 500
_SECONDS, _GLANCE = 10.0, 0.05  # a writer may wait, the watch must not
_TABLES = """
CREATE TABLE IF NOT EXISTS bench (mark TEXT PRIMARY KEY);
CREATE TABLE IF NOT EXISTS notes (
    id INTEGER PRIMARY KEY AUTOINCREMENT, time INTEGER NOT NULL, kind TEXT NOT NULL, analyte TEXT NOT NULL, analyser TEXT NOT NULL,
    detail TEXT NOT NULL, author TEXT NOT NULL, at INTEGER NOT NULL
);
"""


@dataclass(frozen=True, slots=True)
class Note:
    """A laboratory event as a person entered it.

    Attributes
    ----------
    time, kind, analyte, analyser, detail
        As of a `LabEvent`.
    author
        Who entered it.
    at
        When it was entered, UTC microseconds.
    """

    time: int
    kind: EventKind
    analyte: str
    analyser: str
    detail: str
    author: str
    at: int


def add_note(path: Path, note: Note) -> None:
    """Keep a note: on the disk when this returns.

    Raises
    ------
    InputError
        If it cannot be kept.
    """
    with _told(path), closing(sqlite3.connect(path, timeout=_SECONDS)) as connection:
        connection.execute("PRAGMA journal_mode = DELETE")
        connection.execute("PRAGMA synchronous = FULL")
        with connection:
            connection.execute("BEGIN IMMEDIATE")
            for statement in _TABLES.split(";"):
                connection.execute(statement)
            connection.execute(
                "INSERT INTO bench SELECT ? WHERE NOT EXISTS (SELECT 1 FROM bench)", (secrets.token_hex(8),)
            )
            connection.execute(
                "INSERT INTO notes (time, kind, analyte, analyser, detail, author, at) VALUES (?, ?, ?, ?, ?, ?, ?)",
                astuple(note),
            )


class BenchNotes:
    """The notes as the watch reads them.

    Parameters
    ----------
    path
        `bench.sqlite`; it need not exist yet.
    position
        How far an earlier watch had read; "" to begin.
    """

    def __init__(self, path: Path, position: str) -> None:
        self._path = path
        self._mark: str
        self._read: int
        self._mark, self._read = json.loads(position) if position else ("", 0)
        self._seen: tuple[int, int, int] | None = None

    def new(self) -> Chunk | None:
        """The notes that were not read yet, at most `MOST`; None if there are none, or while someone is writing."""
        try:
            found = self._path.stat()
        except OSError:
            return None
        seen = (found.st_ino, found.st_mtime_ns, found.st_size)
        if seen == self._seen:
            return None
        try:
            rows = self._rows()
        except sqlite3.Error:
            return None
        if len(rows) < MOST:
            self._seen = seen
        if not rows:
            return None
        self._read = rows[-1][0]
        items = [
            LabEvent(time, kind, analyte, analyser, detail, f"note by {author}", at)
            for _, time, kind, analyte, analyser, detail, author, at in rows
        ]
        return Chunk(NOTES, 1, items, json.dumps([self._mark, self._read]))

    def _rows(self) -> list[tuple[int, int, EventKind, str, str, str, str, int]]:
        place = f"file:{quote(str(self._path.absolute()))}?mode=ro"
        with closing(sqlite3.connect(place, uri=True, timeout=_GLANCE)) as connection:
            (mark,) = connection.execute("SELECT mark FROM bench").fetchone()
            if mark != self._mark:
                self._mark, self._read = mark, 0
            asked = "SELECT id, time, kind, analyte, analyser, detail, author, at FROM notes WHERE id > ? ORDER BY id LIMIT ?"
            return connection.execute(asked, (self._read, MOST)).fetchall()


@contextmanager
def _told(path: Path) -> Iterator[None]:
    try:
        yield
    except sqlite3.Error as error:
        raise InputError(
            f"The note could not be kept in {path}: {error}. Nothing was noted. See that the folder may be written and has room, and note "
            "it again."
        ) from None
