"""What intake hands from door to room and back: blocks of text, parsed rows, rows left out, the account."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
import pyarrow as pa

from pbm.records.stream import StreamName

COVARIATES = ("specimen", "ward", "sex", "age", "priority", "lot", "patient")
ROLES = ("time", "analyte", "value", "analyser", "unit", *COVARIATES, "kind")

RESULT_SCHEMA = pa.schema(
    [
        ("time", pa.timestamp("us", tz="UTC")),
        ("value", pa.float64()),
        ("censor", pa.int8()),
        *((name, pa.string()) for name in COVARIATES),
        ("file", pa.string()),
        ("line", pa.int64()),
    ]
)
LEFT_OUT_SCHEMA = pa.schema(
    [
        ("file", pa.string()),
        ("line", pa.int64()),
        ("reason", pa.string()),
        ("found", pa.string()),
        ("stream", pa.string()),
    ]
)


@dataclass(frozen=True, slots=True)
class TextBlock:
    """Some consecutive rows of an extract, as text.

    Attributes
    ----------
    file
        The name under which the extract is known in the history.
    line
        Where each row begins: line of the file, or row of a Parquet file, counted from 1.
    columns
        Role (see `ROLES`; only those the extract has) -> text of each row, plain or encoded by dictionary, "" where there is none.
    left_out
        Lines that are no rows (`LEFT_OUT_SCHEMA`).
    decimal, time_format
        How numbers and times are written; without a format, in ISO 8601.
    """

    file: str
    line: npt.NDArray[np.int64]
    columns: Mapping[str, pa.Array]
    left_out: pa.Table
    decimal: Literal[".", ","] = "."
    time_format: str | None = None


@dataclass(frozen=True, slots=True)
class ParsedBlock:
    """What became of a block: results stream by stream, in order of the file within each, and rows left out.

    Attributes
    ----------
    results
        `RESULT_SCHEMA`.
    streams
        Name and number of rows of each stream, in the order in which they lie in `results`.
    left_out
        `LEFT_OUT_SCHEMA`.
    """

    results: pa.Table
    streams: tuple[tuple[StreamName, int], ...]
    left_out: pa.Table


@dataclass(frozen=True, slots=True)
class Sifted:
    """One stream in order of time without duplicates, reruns and repeats; and those."""

    results: pa.Table
    left_out: pa.Table


@dataclass(frozen=True, slots=True)
class TakenExtract:
    """An extract whose rows are in the history.

    Attributes
    ----------
    name
        What the history calls it: its file name, with a number where two files have the same.
    sha256
        Of its bytes: the same file is not taken twice.
    lab_sha256
        Of the `lab.toml` by which it was taken.
    at
        When, in ISO 8601.
    rows, taken
        Rows read, and rows taken of them.
    """

    name: str
    sha256: str
    lab_sha256: str
    at: str
    rows: int
    taken: int
