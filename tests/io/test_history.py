"""A history is read stream by stream, in order of time; its mark tells what was measured and nothing else."""

import hashlib
import struct
from datetime import UTC, datetime
from pathlib import Path
from typing import Any
from urllib.parse import unquote

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.errors import InputError
from pbm.io.history import (
    RESULTS,
    history_mark,
    read_history,
    read_results,
    read_streams,
    stream_folder,
    stream_sizes,
)
from pbm.records.intake import RESULT_SCHEMA
from pbm.records.stream import StreamName

SODIUM = StreamName("sodium", "line-2")
START = datetime(2031, 3, 2, 7, 14, 5, tzinfo=UTC)


def put(folder: Path, name: StreamName, rows: int = 3, changed: dict[str, Any] | None = None, **options: Any) -> None:
    """Lay down a stream as `pbm intake` does, with `changed` columns."""
    columns: dict[str, Any] = {
        "time": [int(START.timestamp() * 1e6) + i for i in range(rows)],
        "value": [139.0 + i for i in range(rows)],
        "censor": [0] * rows,
        "specimen": [f"S-{i}" for i in range(rows)],
        "ward": ["ED" if i % 2 else "" for i in range(rows)],
        "sex": ["F"] * rows,
        "age": ["61"] * rows,
        "priority": [""] * rows,
        "lot": [""] * rows,
        "patient": ["µ" * i for i in range(rows)],
        "file": ["export.csv"] * rows,
        "line": list(range(2, rows + 2)),
    }
    columns |= changed or {}
    table = pa.table([pa.array(columns[field.name]).cast(field.type) for field in RESULT_SCHEMA], schema=RESULT_SCHEMA)
    (folder / stream_folder(name)).mkdir(parents=True, exist_ok=True)
    pq.write_table(table, folder / stream_folder(name) / RESULTS, **options)


def test_a_stream_comes_back_as_it_was_laid_down(tmp_path: Path) -> None:
    put(tmp_path, SODIUM)
    stream = read_history(tmp_path, SODIUM)
    assert stream.name == SODIUM
    assert stream.time.dtype == np.int64
    assert list(stream.time - stream.time[0]) == [0, 1, 2]
    assert stream.time[0] == int(START.timestamp()) * 1_000_000
    assert list(stream.value) == [139.0, 140.0, 141.0]
    assert stream.censor.dtype == np.int8
    assert list(stream.specimen) == ["S-0", "S-1", "S-2"]
    assert list(stream.ward) == ["", "ED", ""]
    assert (list(stream.sex), list(stream.age)) == (["F"] * 3, ["60-74"] * 3)


def test_a_history_of_before_lots_were_kept_is_read_with_none_and_has_the_same_mark(tmp_path: Path) -> None:
    put(tmp_path, SODIUM)
    mark, path = history_mark(tmp_path), tmp_path / stream_folder(SODIUM) / RESULTS
    pq.write_table(pq.read_table(path, partitioning=None).drop_columns(["lot"]), path)
    assert read_results(tmp_path, SODIUM).schema.names == RESULT_SCHEMA.names
    assert read_results(tmp_path, SODIUM, ["lot"])["lot"].to_pylist() == ["", "", ""]
    assert history_mark(tmp_path) == mark


def test_sex_and_age_of_an_older_history_which_holds_them_as_written_are_read(tmp_path: Path) -> None:
    put(tmp_path, SODIUM, changed={"sex": ["female", "M", "?"], "age": ["3 m", "75 and over", ""]})
    stream = read_history(tmp_path, SODIUM)
    assert list(stream.sex) == ["F", "M", ""]
    assert list(stream.age) == ["under 1", "75 and over", ""]


def test_streams_are_listed_by_name_with_their_sizes(tmp_path: Path) -> None:
    names = [StreamName("tsh", "immuno"), SODIUM, StreamName("sodium", "line-1")]
    for rows, name in enumerate(names, start=1):
        put(tmp_path, name, rows)
    assert read_streams(tmp_path) == sorted(names)
    assert stream_sizes(tmp_path) == {names[2]: 3, names[1]: 2, names[0]: 1}


@given(st.text(min_size=1, max_size=30), st.text(min_size=1, max_size=30).filter(lambda text: "@" not in text))
def test_any_name_makes_one_safe_folder_that_tells_the_name_again(analyser: str, analyte: str) -> None:
    try:
        (analyser + analyte).encode()
    except UnicodeEncodeError:
        return
    folder = stream_folder(StreamName(analyte, analyser))
    assert not set(folder) & set('/\\<>:"|?*\0\n')
    assert folder == folder.strip(" .")
    assert StreamName.parse(unquote(folder.removeprefix("stream="))) == StreamName(analyte, analyser)


def test_a_plain_name_is_left_as_it_is() -> None:
    assert stream_folder(SODIUM) == "stream=sodium@line-2"
    assert stream_folder(StreamName("sodium", "A/B 1%")) == "stream=sodium@A%2FB 1%25"


def test_the_mark_does_not_depend_on_how_parquet_was_written(tmp_path: Path) -> None:
    put(tmp_path / "a", SODIUM, 1000)
    put(tmp_path / "b", SODIUM, 1000, compression="zstd", row_group_size=7, use_dictionary=False)
    assert history_mark(tmp_path / "a") == history_mark(tmp_path / "b")
    assert history_mark(tmp_path / "a").rows == 1000
    assert history_mark(tmp_path / "a").first == START


def test_the_mark_is_the_same_with_every_version_of_the_libraries(tmp_path: Path) -> None:
    put(tmp_path, SODIUM)
    # Computed by hand from the description: name, count, then each column as little-endian numbers or lengths and text.
    t0 = int(START.timestamp()) * 1_000_000
    text = [["S-0", "S-1", "S-2"], ["", "ED", ""], ["F"] * 3, ["61"] * 3, [""] * 3]
    expected = b"sodium@line-2\n3\n" + struct.pack("<3q3d3b", t0, t0 + 1, t0 + 2, 139, 140, 141, 0, 0, 0)
    for column in text:
        encoded = [one.encode() for one in column]
        expected += struct.pack("<3i", *map(len, encoded)) + b"".join(encoded)
    assert history_mark(tmp_path).sha256 == hashlib.sha256(expected).hexdigest()


@pytest.mark.parametrize(
    "changed",
    [
        {"value": [139.0, 140.0, 141.00000000000003]},
        {"ward": ["ED", "", ""]},
        {"censor": [0, 0, 1]},
        {"age": ["61", "61", "62"]},
    ],
)
def test_the_mark_changes_with_anything_measured(tmp_path: Path, changed: dict[str, Any]) -> None:
    put(tmp_path / "a", SODIUM)
    put(tmp_path / "b", SODIUM, changed=changed)
    assert history_mark(tmp_path / "a").sha256 != history_mark(tmp_path / "b").sha256


def test_the_mark_does_not_change_with_the_name_of_the_extract_or_the_tokens_of_patients(tmp_path: Path) -> None:
    put(tmp_path / "a", SODIUM)
    put(tmp_path / "b", SODIUM, changed={"file": ["other.csv"] * 3, "line": [9, 10, 11], "patient": ["x", "y", "z"]})
    assert history_mark(tmp_path / "a") == history_mark(tmp_path / "b")


def test_a_missing_history_or_stream_is_told_with_what_to_do(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"There is no history in .* Make one with `pbm intake"):
        read_streams(tmp_path / "history")
    with pytest.raises(InputError, match="holds no stream"):
        read_streams(tmp_path)
    put(tmp_path, SODIUM)
    with pytest.raises(InputError, match='did you mean "sodium@line-2"'):
        read_history(tmp_path, StreamName("sodium", "line-3"))
    (tmp_path / stream_folder(SODIUM) / RESULTS).write_bytes(b"PAR1 is not enough")
    with pytest.raises(InputError, match="cannot be read"):
        read_history(tmp_path, SODIUM)
