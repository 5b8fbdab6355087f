"""A Parquet extract -> blocks of text columns: numbers and times become text that says the same."""

from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from pbm.errors import InputError, one_line
from pbm.io.extract.heading import check_columns, wanted_columns
from pbm.records.intake import LEFT_OUT_SCHEMA, TextBlock
from pbm.records.laboratory import Extract

_ROWS = 200_000


class ColumnarExtract:
    """A Parquet extract, ready to be read once; `name` is what it is called in the history.

    Raises
    ------
    InputError
        If it is damaged, lacks a column that `lab.toml` names, or holds lists or tables in one.
    """

    def __init__(self, path: Path, name: str, columns: Extract) -> None:
        self.guesses: list[str] = []
        self.share_read = 0.0
        self._path, self._name = path, name
        self._wanted = wanted_columns(columns)
        try:
            self._file = pq.ParquetFile(path)
        except (pa.ArrowException, OSError) as error:
            raise InputError(
                f"{path} is damaged or not a whole Parquet file ({one_line(error)}). Copy or export it again."
            ) from None
        schema = self._file.schema_arrow
        check_columns(path, schema.names, columns)
        for column in self._wanted.values():
            if pa.types.is_nested(kind := schema.field(column).type):
                raise InputError(f'{path}, column "{column}" holds {kind}; text, numbers or times were expected.')
        timed = pa.types.is_temporal(schema.field(columns.time).type)
        self._time_format = None if timed else columns.time_format
        self._decimal = "." if _is_number(schema.field(columns.value).type) else columns.decimal

    def blocks(self) -> Iterator[TextBlock]:
        """The rows, block by block.

        Raises
        ------
        InputError
            If a part of the file is damaged.
        """
        row, total = 0, max(self._file.metadata.num_rows, 1)
        with self._file:
            for texts in self._batches():
                rows = len(texts["time"])
                line = np.arange(row + 1, row + rows + 1)
                row += rows
                self.share_read = row / total
                yield TextBlock(
                    self._name, line, texts, LEFT_OUT_SCHEMA.empty_table(), self._decimal, self._time_format
                )

    def _batches(self) -> Iterator[dict[str, pa.Array]]:
        try:
            for batch in self._file.iter_batches(_ROWS, columns=sorted(set(self._wanted.values())), use_threads=False):
                yield {role: _text(batch.column(column)) for role, column in self._wanted.items()}
        except (pa.ArrowException, OSError) as error:
            raise InputError(
                f"{self._path} is damaged ({one_line(error)}). Nothing was taken; copy or export it again."
            ) from None


def _is_number(kind: pa.DataType) -> bool:
    return bool(pa.types.is_floating(kind) or pa.types.is_decimal(kind) or pa.types.is_integer(kind))


def _text(column: pa.Array) -> pa.Array:
    if not pa.types.is_timestamp(column.type):
        return column.cast(pa.string()).fill_null("")
    # Without its zone: pyarrow would look that up in a database of the operating system, which may be missing.
    instants = (
        column.cast(pa.timestamp("us", column.type.tz), safe=False)
        .cast(pa.int64())
        .cast(pa.timestamp("us"))
        .cast(pa.string())
    )
    return (pc.binary_join_element_wise(instants, "Z", "") if column.type.tz else instants).fill_null("")
