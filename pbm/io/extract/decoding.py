"""The bytes of a text extract, plain or gzip -> blocks of UTF-8 that end at a line end, in bounded memory.

The encoding is the one that `lab.toml` names, else the one of the byte order mark, else UTF-8 in which single bytes that do not fit are
read as Latin-1.
"""

import codecs
import gzip
import zlib
from collections.abc import Iterator
from pathlib import Path
from types import TracebackType
from typing import BinaryIO, Self

from pbm.errors import InputError

BLOCK = 8 * 2**20  # measured: larger ones cost more memory and, in page faults, more time
_HEAD = 2**16
_LONGEST_LINE = 16 * 2**20
_GZIP = b"\x1f\x8b"
_MARKS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF32_LE, "utf-32"),
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)
_KNOWN = (
    (b"PK\x03\x04", "a spreadsheet or a zip archive"),
    (b"\xd0\xcf\x11\xe0", "a spreadsheet of an old format"),
    (b"%PDF", "a PDF"),
    (b"SQLite format 3", "a database"),
)


def _one_byte(error: UnicodeError) -> tuple[str, int]:
    assert isinstance(error, UnicodeDecodeError)
    return error.object[error.start : error.end].decode("latin-1"), error.end


codecs.register_error("pbm-latin-1", _one_byte)


class TextSource:
    """An open text extract.

    Attributes
    ----------
    encoding
        Name of the encoding in which it is read.
    guesses
        What was guessed about it so far, for the account.
    """

    def __init__(self, path: Path, encoding: str | None) -> None:
        self.guesses: list[str] = []
        self._repaired = False
        self._path = path
        self._file = path.open("rb")
        try:
            packed = self._file.read(2) == _GZIP
            self._file.seek(0)
            self._bytes: BinaryIO | gzip.GzipFile = gzip.GzipFile(fileobj=self._file) if packed else self._file
            self._size = max(path.stat().st_size, 1)
            self._head = self._read(_HEAD)
            self.encoding = encoding or self._encoding_of_head()
            self._lenient = encoding is None and self.encoding == "utf-8"
        except BaseException:
            self._file.close()
            raise

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._file.close()

    @property
    def share_read(self) -> float:
        """How much of the file has been read, from 0 to 1."""
        return 1.0 if self._file.closed else min(1.0, self._file.tell() / self._size)

    def blocks(self) -> Iterator[bytes]:
        """Blocks of whole lines, each ending in a line end; together all of the file.

        Raises
        ------
        InputError
            If the file is empty, breaks off, is damaged, is not in its encoding, or has no line ends.
        """
        open_line, any_line = b"", False
        for chunk in self._in_utf8():
            cut = chunk.rfind(b"\n") + 1
            if cut:
                any_line = True
                yield open_line + chunk[:cut]
                open_line = chunk[cut:]
            else:
                open_line += chunk
            if len(open_line) > _LONGEST_LINE:
                raise InputError(
                    f"{self._path} holds a line of more than {_LONGEST_LINE >> 20} MB: it is not a text table of results."
                )
        if open_line:
            yield open_line + b"\n"
        elif not any_line:
            raise self._empty()

    def repaired(self, block: bytes, line: int) -> bytes:
        """The block as valid UTF-8; `line` is the number of its first line."""
        try:
            block.decode("utf-8")
        except UnicodeDecodeError as error:
            if not self._repaired:
                at = line + block.count(b"\n", 0, error.start)
                self.guesses.append(
                    f"text that is not UTF-8 (first in line {at}) was read as Latin-1; extract.encoding in lab.toml can say otherwise"
                )
            self._repaired = True
            return block.decode("utf-8", "pbm-latin-1").encode("utf-8")
        return block

    def _in_utf8(self) -> Iterator[bytes]:
        old_line_ends: bool | None = None
        for chunk in self._chunks() if self._lenient else self._transcoded():
            if old_line_ends is None:
                old_line_ends = b"\n" not in chunk and b"\r" in chunk
            yield chunk.replace(b"\r", b"\n") if old_line_ends else chunk

    def _transcoded(self) -> Iterator[bytes]:
        decoder = codecs.getincrementaldecoder(self.encoding)()
        try:
            for chunk in self._chunks():
                yield decoder.decode(chunk).encode("utf-8")
            yield decoder.decode(b"", final=True).encode("utf-8")
        except UnicodeError as error:
            raise InputError(
                f"{self._path} is not {self.encoding} throughout: {error}. Correct extract.encoding in lab.toml, or leave it out."
            ) from None

    def _chunks(self) -> Iterator[bytes]:
        yield self._head
        while chunk := self._read(BLOCK):
            yield chunk

    def _read(self, size: int) -> bytes:
        try:
            return self._bytes.read(size)
        except (EOFError, gzip.BadGzipFile, zlib.error) as error:
            raise InputError(
                f"{self._path} breaks off or is damaged ({error}). Nothing was taken; copy or export it again."
            ) from None
        except OSError as error:
            raise InputError(f"{self._path} cannot be read: {error.strerror}. Nothing was taken.") from None

    def _empty(self) -> InputError:
        return InputError(f"{self._path} is empty. An extract holds a header line and one line for each result.")

    def _encoding_of_head(self) -> str:
        for mark, name in _MARKS:
            if self._head.startswith(mark):
                return name
        if not self._head.strip():
            raise self._empty()
        kind = next((name for start, name in _KNOWN if self._head.startswith(start)), "not text")
        if b"\0" in self._head or kind != "not text":
            raise InputError(
                f"{self._path} is {kind}, not a text table. Export it as CSV (UTF-8) or Parquet; if it is UTF-16 without a byte order "
                'mark, write extract.encoding = "utf-16-le" in lab.toml.'
            )
        return "utf-8"
