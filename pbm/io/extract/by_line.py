"""Lines of delimited text read one by one: slower than in one go, but no line is lost to a quote that is never closed."""

import csv
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pyarrow as pa

_LONGEST_RECORD = 25  # lines over which one quoted field may run before its quote counts as a slip


@dataclass(frozen=True, slots=True)
class Lines:
    """What some lines hold.

    Attributes
    ----------
    columns
        Place of a column -> its text, row by row.
    line
        The line at which each row begins, from 0.
    bad
        Lines that are no rows: line, reason, what was found.
    inside_quotes
        Number of lines that continue a row begun on a line before.
    used
        Number of lines read; `held` are the bytes of those not yet read, because a quote is open at the end.
    """

    columns: dict[int, pa.Array]
    line: npt.NDArray[np.int64]
    bad: list[tuple[int, str, str]]
    used: int
    inside_quotes: int = 0
    held: bytes = b""


@dataclass(frozen=True, slots=True)
class Rows:
    """Rows of fields, the line at which each begins, and the rest as in `Lines`."""

    rows: list[list[str]]
    starts: list[int]
    bad: list[tuple[int, str, str]]
    used: int
    inside_quotes: int


def read_by_line(block: bytes, delimiter: str, width: int, places: set[int], final: bool) -> Lines:
    """Read whole lines of UTF-8.

    Parameters
    ----------
    block
        Lines, each ending in a line feed.
    delimiter, width
        The sign between columns, and how many there are.
    places
        The columns wanted.
    final
        Whether no lines follow: else a record whose quote is open at the end waits for them.
    """
    lines = [line.removesuffix("\r") for line in block.decode("utf-8").split("\n")[:-1]]
    rows = split_rows(lines, delimiter, width, final)
    columns = {place: pa.array([row[place] for row in rows.rows], pa.string()) for place in places}
    held = "".join(f"{line}\n" for line in lines[rows.used :]).encode("utf-8")
    return Lines(columns, np.array(rows.starts, np.int64), rows.bad, rows.used, rows.inside_quotes, held)


def split_rows(lines: list[str], delimiter: str, width: int, final: bool) -> Rows:
    """Part lines without their line ends into rows; the other arguments as for `read_by_line`."""
    rows: list[list[str]] = []
    starts: list[int] = []
    bad: list[tuple[int, str, str]] = []
    at, inside = 0, 0
    while at < len(lines):
        # An empty line is a row without anything, as pyarrow reads it.
        record, spans = _record(lines, at, delimiter) if lines[at] else ([""] * width, 1)
        if record is None and not final and at + _LONGEST_RECORD > len(lines):
            break
        if record is not None and len(record) == width:
            rows.append(record)
            starts.append(at)
            inside += spans - 1
            at += spans
            continue
        bad.append((at, *fault(lines[at].strip(), None if record is None else len(record), width)))
        at += 1
    return Rows(rows, starts, bad, at, inside)


def _record(lines: list[str], at: int, delimiter: str) -> tuple[list[str] | None, int]:
    """The record that begins on a line, and over how many lines it runs; None if its quote is not closed in reach."""
    if '"' not in lines[at]:
        return lines[at].split(delimiter), 1
    alone, spans = _parsed(lines[at : at + 1], delimiter, strict=False)
    if alone is not None:
        return alone, spans
    # Strict: a quote that closes in the middle of another line's field was opened by a slip.
    return _parsed(lines[at : at + _LONGEST_RECORD], delimiter, strict=True)


def _parsed(lines: list[str], delimiter: str, strict: bool) -> tuple[list[str] | None, int]:
    beyond = False

    def supply() -> Iterator[str]:
        nonlocal beyond
        for line in lines:
            yield f"{line}\n"
        beyond = True

    reader = csv.reader(supply(), delimiter=delimiter, strict=strict)
    try:
        record = next(reader)
    except csv.Error:
        return None, 1
    return (None if beyond else record), reader.line_num


def fault(line: str, found: int | None, expected: int) -> tuple[str, str]:
    """Why a line is no row, and what shows it: never the line itself, which may hold a patient's name.

    Parameters
    ----------
    line
        The line without spaces around it.
    found, expected
        The number of its columns (None where a quote is not closed), and of those of the header line.
    """
    if not line:
        return "blank line", ""
    if found is None:
        return "quote not closed", ""
    return "wrong number of columns", f"columns: {found}, not {expected}"
