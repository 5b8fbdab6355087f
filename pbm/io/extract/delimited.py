"""A text extract (CSV and its kin) -> blocks of columns, with an exact account: lines = rows + lines left out + lines inside quotes.

Each block of lines is read by pyarrow. That reader may join lines across a quote that is never closed; so where its account does not come
out, or quotes or line ends are irregular, the block is read again line by line.
"""

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.csv as pv

from pbm.io.extract.by_line import Lines, fault, read_by_line
from pbm.io.extract.decoding import TextSource
from pbm.io.extract.heading import Heading, find_heading
from pbm.records.intake import LEFT_OUT_SCHEMA, TextBlock
from pbm.records.laboratory import Extract

_HEAD = 2**16


class DelimitedExtract:
    """A text extract, ready to be read once; `name` is what it is called in the history.

    Raises
    ------
    InputError
        If it cannot be opened, is empty, or is no text.
    """

    def __init__(self, path: Path, name: str, columns: Extract) -> None:
        self._path, self._name, self._columns = path, name, columns
        self._source = TextSource(path, columns.encoding)

    @property
    def guesses(self) -> list[str]:
        """What was guessed about the file; complete when all blocks are read."""
        return self._source.guesses

    @property
    def share_read(self) -> float:
        """How much of the file has been read, from 0 to 1."""
        return self._source.share_read

    def blocks(self) -> Iterator[TextBlock]:
        """The rows, block by block.

        Raises
        ------
        InputError
            If the file has no usable header line, breaks off, or is not in its encoding.
        """
        with self._source as source:
            blocks = source.blocks()
            block = source.repaired(next(blocks), 1)
            heading = find_heading(self._path, block[:_HEAD].decode("utf-8", "ignore"), self._columns)
            source.guesses.insert(0, f"columns parted by {heading.delimiter_name}, text in {source.encoding.upper()}")
            above, data = _parted(block, heading)
            yield self._text_block(heading, above, 1)
            line, held = heading.line + 1, data
            for block in blocks:
                read = _read(source.repaired(held + block, line), heading, final=False)
                yield self._text_block(heading, read, line)
                line, held = line + read.used, read.held
            yield self._text_block(heading, _read(held, heading, final=True), line)

    def _text_block(self, heading: Heading, read: Lines, first: int) -> TextBlock:
        lines, reasons, found = zip(*read.bad, strict=True) if read.bad else ((), (), ())
        count = len(lines)
        left_out = [
            pa.repeat(self._name, count),
            pa.array([first + line for line in lines], pa.int64()),
            pa.array(reasons, pa.string()),
            pa.array(found, pa.string()),
            pa.repeat("", count),
        ]
        return TextBlock(
            file=self._name,
            line=read.line + first,
            columns={role: read.columns[place] for role, place in heading.places.items()},
            left_out=pa.table(left_out, schema=LEFT_OUT_SCHEMA),
            decimal=self._columns.decimal,
            time_format=self._columns.time_format,
        )


def _parted(block: bytes, heading: Heading) -> tuple[Lines, bytes]:
    """The lines above the header line, as lines left out, and the bytes below it."""
    *above, _, below = block.split(b"\n", heading.line)
    bad = [(number, "above the header line", "") for number in range(len(above))]
    none = dict.fromkeys(heading.places.values(), pa.nulls(0, pa.string()))
    return Lines(none, np.array([], np.int64), bad, heading.line), below


_REPEATED = pa.dictionary(pa.int32(), pa.string())


def _read(block: bytes, heading: Heading, final: bool) -> Lines:
    """Rows of whole lines, with their account proved."""
    count = block.count(b"\n")
    lines = _in_one_go(block, heading, count) if _regular(block) else None
    if lines is None:
        lines = read_by_line(block, heading.delimiter, heading.width, set(heading.places.values()), final)
    assert len(lines.line) + len(lines.bad) + lines.inside_quotes == lines.used
    assert lines.used + lines.held.count(b"\n") == count
    return lines


def _regular(block: bytes) -> bool:
    """No quote open at the end (it may close in the next block), and no line end that is not a line feed."""
    quotes = block.count(b'"') if b'"' in block else 0
    return quotes % 2 == 0 and (b"\r" not in block or block.count(b"\r") == block.count(b"\r\n"))


def _in_one_go(block: bytes, heading: Heading, count: int) -> Lines | None:
    """What pyarrow reads; None if it does not account for every line."""
    bad: list[tuple[int, str, str]] = []

    def wrong(row: pv.InvalidRow) -> str:
        bad.append((row.number - 1, *fault(row.text.strip(), row.actual_columns, heading.width)))
        return "skip"

    # Different in nearly every row; the texts of the others come again and again, and are told apart while they are read.
    plain = {heading.places[role] for role in ("time", "specimen") if role in heading.places}
    places = sorted(set(heading.places.values()))
    try:
        table = pv.read_csv(
            pa.BufferReader(block),
            read_options=pv.ReadOptions(
                use_threads=False,
                block_size=len(block) + 1,
                column_names=[str(place) for place in range(heading.width)],
            ),
            parse_options=pv.ParseOptions(
                delimiter=heading.delimiter,
                ignore_empty_lines=False,
                quote_char='"' if b'"' in block else False,
                invalid_row_handler=wrong,
            ),
            convert_options=pv.ConvertOptions(
                column_types={str(place): pa.string() if place in plain else _REPEATED for place in places},
                include_columns=[str(place) for place in places],
                strings_can_be_null=False,
                check_utf8=False,
            ),
        )
    except pa.ArrowInvalid:
        return None
    if len(table) + len(bad) != count:
        return None
    good = np.ones(count, np.bool_)
    good[[line for line, _, _ in bad]] = False
    columns = {place: table[str(place)].combine_chunks() for place in places}
    return Lines(columns, np.flatnonzero(good), bad, count)
