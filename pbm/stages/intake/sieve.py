"""Which rows of a block are left out, and why: every row gets the first reason that applies to it, and the text that shows it."""

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc

from pbm.records.intake import LEFT_OUT_SCHEMA, TextBlock

Codes = npt.NDArray[np.int64]
Mask = npt.NDArray[np.bool_]
_LONGEST_FOUND = 40  # characters: enough to see what it is, too few for a remark about a patient


class Sieve:
    """The rows of one block, fewer with every reason to leave some out."""

    def __init__(self, block: TextBlock) -> None:
        self._block = block
        self._why = np.zeros(len(block.line), np.int16)
        self._reasons: list[tuple[str, str | None]] = []
        self._encoded: dict[str, tuple[Codes, list[str]]] = {}

    def kept(self) -> Codes:
        """Row numbers not left out so far."""
        return np.flatnonzero(self._why == 0)

    def has(self, role: str) -> bool:
        """Whether the extract has such a column."""
        return role in self._block.columns

    def trimmed(self, role: str, rows: Codes) -> pa.Array:
        """The text of some rows without spaces around it; "" if the extract has no such column."""
        if not self.has(role):
            return pa.repeat("", len(rows))
        if pa.types.is_dictionary(self._block.columns[role].type):
            codes, texts = self.encoded(role)
            return pa.array(texts, pa.string()).take(pa.array(codes[rows]))
        return pc.utf8_trim_whitespace(self._block.columns[role].take(pa.array(rows)))

    def encoded(self, role: str) -> tuple[Codes, list[str]]:
        """A column as codes into the list of its different texts, which have no spaces around them."""
        if role not in self._encoded:
            column = self._block.columns[role]
            found = column if pa.types.is_dictionary(column.type) else column.dictionary_encode()
            texts = list(map(str.strip, found.dictionary.to_pylist()))
            # Texts that differ only in spaces become one.
            different = list(dict.fromkeys(texts))
            codes = found.indices.to_numpy().astype(np.int64)
            if len(different) < len(texts):
                number = {text: code for code, text in enumerate(different)}
                codes = np.array([number[text] for text in texts], np.int64)[codes]
            self._encoded[role] = codes, different
        return self._encoded[role]

    def mapped(self, role: str, number: Callable[[str], int]) -> Codes:
        """For each row a number that depends on the text of a column."""
        codes, texts = self.encoded(role)
        return np.array([number(text) for text in texts], np.int64)[codes]

    def where(self, role: str, holds: Callable[[str], bool]) -> Mask:
        """For each row whether something holds of the text of a column."""
        codes, texts = self.encoded(role)
        return np.array([holds(text) for text in texts], np.bool_)[codes]

    def leave_where(self, role: str, wrong: Callable[[str], bool], reason: str) -> None:
        """Leave out rows by the text of a column, if the extract has it."""
        if self.has(role):
            self.leave(self.where(role, wrong), reason, role)

    def leave(self, where: Mask, reason: str, found: str | None = None) -> None:
        """Leave out the rows of a mask that are still kept; the column `found` shows why."""
        where = where & (self._why == 0)
        if where.any():
            self._reasons.append((reason, found))
            self._why[where] = len(self._reasons)

    def leave_rows(self, rows: Codes, reason: str, found: str | None = None) -> None:
        """Leave out rows by their numbers."""
        where = np.zeros(len(self._why), np.bool_)
        where[rows] = True
        self.leave(where, reason, found)

    def left_out(self, stream: Callable[[Codes], pa.Array]) -> pa.Table:
        """All rows left out (`LEFT_OUT_SCHEMA`), with the lines of the block that were no rows; `stream` names the stream of rows."""
        tables = [self._block.left_out]
        for number, (reason, found) in enumerate(self._reasons, start=1):
            rows = np.flatnonzero(self._why == number)
            shown = self.trimmed(found, rows) if found else pa.repeat("", len(rows))
            columns = [
                pa.repeat(self._block.file, len(rows)),
                self._block.line[rows],
                pa.repeat(reason, len(rows)),
                pc.utf8_slice_codeunits(shown, 0, _LONGEST_FOUND),
                stream(rows),
            ]
            tables.append(pa.table(columns, schema=LEFT_OUT_SCHEMA))
        return pa.concat_tables(tables)
