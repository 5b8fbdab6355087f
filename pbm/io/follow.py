"""A growing delimited file: whole lines as they come, and a position from which to go on after a stop.

    position    edition of the feed, bytes and lines read, and a hash of the bytes just before

A file that is shorter than the position, or that holds other bytes just before it, is another file under the same name (it was rotated or
cut short): it is read from its first line, as the next edition. When the name passes to another file while it is followed, the old one is
read to its end first. A last line without a line end waits.
"""

import codecs
import hashlib
import json
import os
import stat
from collections.abc import Iterable
from dataclasses import asdict, dataclass
from operator import itemgetter
from pathlib import Path

import pbm.io.extract.decoding  # noqa: F401  registers the reading of single bytes that are not UTF-8
from pbm.errors import FeedError, InputError
from pbm.io.extract.by_line import Rows, split_rows
from pbm.io.extract.heading import Heading, find_heading
from pbm.records.laboratory import Extract
from pbm.records.reading import Chunk, Reading, SetAside

MOST_LINES = 500
_BLOCK = 2**18
_TAIL = 256
_ROLES = ("time", "analyte", "analyser", "value", "unit", "specimen", "ward", "kind", "patient", "sex", "age")
_WIDE = (codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)


@dataclass(frozen=True, slots=True)
class Position:
    """How far a file was read: edition of the feed, bytes, lines, and a hash of the last bytes read."""

    edition: int = 1
    offset: int = 0
    line: int = 0
    tail: str = ""

    @classmethod
    def parse(cls, text: str) -> "Position":
        """A position as it was kept; "" is the begin of the first edition."""
        return cls(**json.loads(text)) if text else cls()

    def __str__(self) -> str:
        return json.dumps(asdict(self))


class FollowedFile:
    """A file that grows at its end.

    Parameters
    ----------
    path
        The file.
    columns
        Which column holds what.
    position
        Where an earlier watch stopped; "" to begin.

    Attributes
    ----------
    source
        Name of the feed.
    notices
        What a person should know about the file, such as that it was replaced; the caller takes them out.

    Raises
    ------
    InputError
        Here and while reading: it is no file that can be read, or has no usable header line.
    FeedError
        While reading: the file has become unreadable.
    """

    def __init__(self, path: Path, columns: Extract, position: str = "") -> None:
        self.source = str(path.absolute())
        self.notices: list[str] = []
        # A live file need not hold what only a history is asked for.
        self._path, self._columns = path, columns.model_copy(update={"priority": None, "lot": None})
        self._at = Position.parse(position)
        self._heading: Heading | None = None
        self._file = self._opened()
        self._leaving = False

    def close(self) -> None:
        """Close the file."""
        os.close(self._file)

    @property
    def unread(self) -> int:
        """Bytes after the position: a line without an end, or the begin of a row whose quote is open."""
        return max(0, os.fstat(self._file).st_size - self._at.offset)

    def read(self) -> Chunk | None:
        """The next whole lines, at most `MOST_LINES` of them; None if there are none yet."""
        try:
            return self._read()
        except OSError as error:
            raise FeedError(
                f"{self._path} can no longer be read: {error.strerror}. What was read is kept; start `pbm watch` again when it can."
            ) from None

    def _read(self) -> Chunk | None:
        self._begin_anew_if_replaced()
        block = os.pread(self._file, _BLOCK, self._at.offset)
        if self._heading is None and not self._find_heading():
            return None
        if self._at.offset == 0:
            return self._above_the_rows(block)
        lines = block.split(b"\n")[:-1][:MOST_LINES]
        full = len(block) == _BLOCK
        chunk = self._rows(lines, final=self._leaving or full) if lines else None
        if chunk is None and full:
            chunk = self._too_long(block)
        if chunk is None:
            return self._follow_the_name(block)
        self._leaving = False
        return chunk

    # What is in the lines

    def _find_heading(self) -> bool:
        """Whether the file has its header line by now."""
        head = os.pread(self._file, _BLOCK, 0)
        if head.startswith(_WIDE):
            raise InputError(
                f"{self._path} is UTF-16, which cannot be followed line by line. Have it written as UTF-8, or in a one-byte encoding named "
                "by extract.encoding in lab.toml."
            )
        whole = head[: head.rfind(b"\n") + 1]
        if whole:
            self._heading = find_heading(self._path, self._decoded(whole).removeprefix("\ufeff"), self._columns)
        return bool(whole)

    def _decoded(self, block: bytes) -> str:
        return block.decode(self._columns.encoding or "utf-8", "pbm-latin-1")

    def _above_the_rows(self, block: bytes) -> Chunk:
        assert self._heading is not None
        lines = block.split(b"\n")[: self._heading.line]
        above = [SetAside(number, "above the header line") for number in range(1, self._heading.line)]
        return self._chunk(above, lines)

    def _rows(self, lines: list[bytes], final: bool) -> Chunk | None:
        heading, first = self._heading, self._at.line + 1
        assert heading is not None
        texts = [line.removesuffix("\r") for line in self._decoded(b"\n".join(lines)).split("\n")]
        read = split_rows(texts, heading.delimiter, heading.width, final)
        return self._chunk(_items(read, heading, first), lines[: read.used]) if read.used else None

    def _too_long(self, block: bytes) -> Chunk:
        """A line that is no row of any table is left behind, piece by piece; what follows its end is read as usual."""
        return self._chunk([SetAside(self._at.line + 1, "line too long")], [block[:-1]])

    def _chunk(self, items: Iterable[Reading | SetAside], lines: list[bytes]) -> Chunk:
        offset = self._at.offset + sum(map(len, lines)) + len(lines)
        self._at = Position(self._at.edition, offset, self._at.line + len(lines), self._tail(offset))
        return Chunk(self.source, self._at.edition, list(items), str(self._at))

    # Which file it is

    def _opened(self) -> int:
        try:
            file = os.open(self._path, os.O_RDONLY | os.O_NONBLOCK)
        except OSError as error:
            raise InputError(
                f"{self._path} cannot be read: {error.strerror}. A growing CSV file was expected."
            ) from None
        if not stat.S_ISREG(os.fstat(file).st_mode):
            os.close(file)
            raise InputError(
                f"{self._path} is not a file. A growing CSV file was expected; a program can send NDJSON to --from - instead."
            )
        return file

    def _tail(self, offset: int) -> str:
        begin = max(0, offset - _TAIL)
        return hashlib.sha256(os.pread(self._file, offset - begin, begin)).hexdigest()[:16] if offset else ""

    def _begin_anew_if_replaced(self) -> None:
        size = os.fstat(self._file).st_size
        if size < self._at.offset or (size > self._at.offset and self._tail(self._at.offset) != self._at.tail):
            self.notices.append(
                f"{self._path} is no longer the file that was read up to line {self._at.line}: it is read from its first line. If lines of "
                "the earlier file were not read yet, feed that file with `pbm watch --from FILE --once`."
            )
            self._at = Position(self._at.edition + 1)
            self._heading = None

    def _follow_the_name(self, block: bytes) -> Chunk | None:
        """Go over to the file that now has the name, once the old one had time to be written to its end."""
        if not self._is_renamed():
            return None
        if not self._leaving:
            self._leaving = True
            return None
        left = [SetAside(self._at.line + 1, "line without an end")] if block else []
        chunk = Chunk(self.source, self._at.edition, left, str(self._at)) if left else None
        os.close(self._file)
        self._file, self._heading, self._leaving = self._opened(), None, False
        return chunk

    def _is_renamed(self) -> bool:
        try:
            named = self._path.stat()
        except FileNotFoundError:
            return False
        return not os.path.samestat(named, os.fstat(self._file))


def _items(read: Rows, heading: Heading, first: int) -> list[Reading | SetAside]:
    """Rows and bad lines in the order of the file."""
    # One field more, empty, stands for the roles that the file has no column for.
    pick = itemgetter(*(heading.places.get(role, heading.width) for role in _ROLES))
    rows: list[Reading | SetAside] = [
        Reading(first + line, *pick([*row, ""])) for line, row in zip(read.starts, read.rows, strict=True)
    ]
    if not read.bad:
        return rows
    bad = [SetAside(first + line, reason) for line, reason, _ in read.bad]
    return sorted([*rows, *bad], key=lambda item: item.place)
