"""`history/`: one folder of Parquet per stream, and `left-out.parquet`. Where things lie, and how they are read.

history/stream=sodium@line-2/results.parquet    results in order of time
history/left-out.parquet                        every row that was not taken: file, line, reason, what was found, stream
history/extracts.json                           which extracts were taken, by SHA-256
"""

import difflib
import hashlib
import json
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any
from urllib.parse import unquote

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from pbm.errors import InputError, one_line
from pbm.records.intake import COVARIATES, RESULT_SCHEMA, TakenExtract
from pbm.records.plan import HistoryMark
from pbm.records.sex_and_age import read_age_band, read_sex
from pbm.records.stream import StreamHistory, StreamName

RESULTS = "results.parquet"
LEFT_OUT = "left-out.parquet"
EXTRACTS = "extracts.json"
PATIENT_KEY = "patient.key"
_PREFIX = "stream="
_UNSAFE = re.compile(r'[\x00-\x1f\x7f<>:"/\\|?*%]|^[ .]|[ .]$')

# The mark of a history leaves out where a row came from, the tokens for patients, whose key differs from history to history, and what only
# the survey tells of.
_MARKED = ("time", "value", "censor", *(name for name in COVARIATES if name not in ("patient", "lot")))


def stream_folder(name: StreamName) -> str:
    """The name of a stream's folder: `stream=sodium@line-2`; characters that a file system may refuse are percent-encoded."""
    return _PREFIX + _UNSAFE.sub(lambda found: "".join(f"%{byte:02X}" for byte in found[0].encode()), str(name))


def set_aside(folder: Path) -> Path:
    """Where the old history stands for the instant in which a new one takes its place."""
    return folder.with_name(f"{folder.name}.before")


def read_extracts(folder: Path) -> list[TakenExtract]:
    """The extracts that a history was made from, in the order in which they were taken; none where there is no history.

    Raises
    ------
    InputError
        If the list cannot be read.
    """
    path = folder / EXTRACTS
    try:
        return [TakenExtract(**one) for one in json.loads(path.read_text("utf-8"))]
    except FileNotFoundError:
        return []
    except (ValueError, TypeError, OSError) as error:
        raise InputError(
            f"{path} cannot be read ({one_line(error)}). Delete {folder} and take all extracts again with `pbm intake`."
        ) from None


def read_streams(folder: Path) -> list[StreamName]:
    """The streams of a history, in order of their names.

    Raises
    ------
    InputError
        If there is no history in the folder.
    """
    if not folder.is_dir() and (kept := set_aside(folder)).is_dir():
        raise InputError(
            f"An intake was cut off while it changed {folder}. Rename {kept} to {folder}, or run `pbm intake` again."
        )
    if not folder.is_dir():
        raise InputError(f"There is no history in {folder}. Make one with `pbm intake FILE...`.")
    found = [one.parent.name for one in folder.glob(f"{_PREFIX}*/{RESULTS}")]
    if not found:
        raise InputError(f"The history in {folder} holds no stream. Make a new one with `pbm intake FILE...`.")
    return sorted(StreamName.parse(unquote(name.removeprefix(_PREFIX))) for name in found)


def read_history(folder: Path, name: StreamName) -> StreamHistory:
    """All results of one stream in order of time.

    Raises
    ------
    InputError
        If the history does not hold the stream, or its file cannot be read.
    """
    table = read_results(folder, name, ["time", "value", "censor", "specimen", "ward", "sex", "age"])
    return StreamHistory(
        name=name,
        time=table["time"].cast(pa.int64()).to_numpy(),
        value=table["value"].to_numpy(),
        censor=table["censor"].to_numpy(),
        specimen=_objects(table["specimen"]),
        ward=_objects(table["ward"]),
        # A history taken by an earlier version holds sex and age as they were written.
        sex=_objects(table["sex"], read_sex),
        age=_objects(table["age"], read_age_band),
    )


def read_times(folder: Path, name: StreamName) -> npt.NDArray[np.int64]:
    """When the results of one stream came, UTC microseconds, in order.

    Raises
    ------
    InputError
        If the history does not hold the stream, or its file cannot be read.
    """
    times: npt.NDArray[np.int64] = read_results(folder, name, ["time"])["time"].cast(pa.int64()).to_numpy()
    return times


def read_results(folder: Path, name: StreamName, columns: list[str] | None = None) -> pa.Table:
    """The table of one stream: see `records.intake.RESULT_SCHEMA`; all columns, or those named.

    Raises
    ------
    InputError
        If the history does not hold the stream, or its file cannot be read.
    """
    path = folder / stream_folder(name) / RESULTS
    try:
        # Not read_table: it takes a column "stream" out of the folder's name, and fails where a column is not in the file.
        with pq.ParquetFile(path) as file:
            table = file.read(columns=columns)
    except FileNotFoundError:
        raise InputError(_no_such_stream(folder, name)) from None
    except (pa.ArrowInvalid, OSError) as error:
        raise InputError(
            f"{path} cannot be read ({one_line(error)}). Delete {folder} and take the extracts again with `pbm intake`."
        ) from None
    return _with_lots(table, columns or RESULT_SCHEMA.names)


def _with_lots(table: pa.Table, columns: list[str]) -> pa.Table:
    """The table with these columns; a history taken by an earlier version knows no lots."""
    if "lot" not in columns or "lot" in table.column_names:
        return table
    return table.append_column("lot", pa.array([""] * len(table), pa.string())).select(columns)


def stream_sizes(folder: Path) -> dict[StreamName, int]:
    """The number of results of each stream, from the heads of the files alone.

    Raises
    ------
    InputError
        If there is no history in the folder.
    """
    return {name: pq.read_metadata(folder / stream_folder(name) / RESULTS).num_rows for name in read_streams(folder)}


def history_mark(folder: Path) -> HistoryMark:
    """What a history holds: first and last time, number of results, and a hash of the contents.

    The hash covers, stream by stream in order of name and row by row in stored order, what was measured (time, value, censor, specimen,
    ward, sex, age, priority), not the bytes of the Parquet files: another version of the file format gives the same hash.

    Raises
    ------
    InputError
        If there is no history in the folder, or a file in it cannot be read.
    """
    total, rows = hashlib.sha256(), 0
    first, last = [], []
    for name in read_streams(folder):
        table = read_results(folder, name, list(_MARKED))
        total.update(f"{name}\n{len(table)}\n".encode())
        for column in _MARKED:
            _update(total, table[column])
        rows += len(table)
        first.append(table["time"][0].as_py())
        last.append(table["time"][-1].as_py())
    return HistoryMark(first=min(first), last=max(last), rows=rows, sha256=total.hexdigest())


def _update(total: Any, column: pa.ChunkedArray) -> None:
    """Add a column to a hash: numbers as little-endian bytes, text as its lengths and then its UTF-8."""
    if not pa.types.is_string(column.type):
        numbers = column.cast(pa.int64()) if pa.types.is_timestamp(column.type) else column
        values = numbers.to_numpy()
        total.update(np.ascontiguousarray(values, values.dtype.newbyteorder("<")))
        return
    for chunk in column.chunks:
        total.update(np.ascontiguousarray(pc.binary_length(chunk).to_numpy(zero_copy_only=False), "<i4"))
    for chunk in column.chunks:
        offsets = np.frombuffer(chunk.buffers()[1], np.int32, len(chunk) + 1, chunk.offset * 4)
        if offsets[-1] > offsets[0]:
            total.update(memoryview(chunk.buffers()[2])[offsets[0] : offsets[-1]])


def _objects(column: pa.ChunkedArray, read: Callable[[str], str] = str) -> npt.NDArray[np.object_]:
    # One Python object per different text, not per row: a ward has a dozen names and a million results.
    encoded = column.combine_chunks().dictionary_encode()
    words: npt.NDArray[np.object_] = np.array([read(text) for text in encoded.dictionary.to_pylist()], dtype=object)
    codes: npt.NDArray[np.int32] = encoded.indices.to_numpy(zero_copy_only=False)
    return words[codes]


def _no_such_stream(folder: Path, name: StreamName) -> str:
    held = [str(one) for one in read_streams(folder)]
    near = difflib.get_close_matches(str(name), held, n=1)
    hint = (
        f'did you mean "{near[0]}"?' if near else f"it holds {', '.join(held[:10])}{' ...' if len(held) > 10 else ''}."
    )
    return f'The history in {folder} holds no stream "{name}": {hint}'
