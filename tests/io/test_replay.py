"""A history replayed: all streams in order of time, and a position to go on from."""

from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from pbm.errors import InputError
from pbm.io.history import RESULTS, stream_folder
from pbm.io.replay import Replay
from pbm.records.intake import RESULT_SCHEMA
from pbm.records.reading import Chunk
from pbm.records.result import Result
from tests.live_laboratory import two_lines

FEED = two_lines(1, 1500)


def write_history(folder: Path, some: list[Result]) -> Path:
    for name in {one.stream for one in some}:
        rows = [one for one in some if one.stream == name]
        empty = [""] * len(rows)
        columns = {
            "time": pa.array([one.time for one in rows], pa.int64()).cast(RESULT_SCHEMA.field("time").type),
            "value": [one.value for one in rows],
            "censor": pa.array([one.censor for one in rows], pa.int8()),
            "specimen": [one.specimen for one in rows],
            "ward": [one.ward for one in rows],
        }
        whole = [columns.get(field.name, [0] * len(rows) if field.name == "line" else empty) for field in RESULT_SCHEMA]
        (folder / stream_folder(name)).mkdir(parents=True, exist_ok=True)
        pq.write_table(pa.table(whole, schema=RESULT_SCHEMA), folder / stream_folder(name) / RESULTS)
    return folder


@pytest.fixture
def history(tmp_path: Path) -> Path:
    return write_history(tmp_path / "history", FEED)


def items(chunks: list[Chunk]) -> list[object]:
    return [item for chunk in chunks for item in chunk.items]


def test_all_streams_come_in_order_of_time(history: Path) -> None:
    assert items(list(Replay(history).chunks())) == FEED


def test_it_goes_on_from_the_position_of_any_chunk(history: Path) -> None:
    chunks = list(Replay(history).chunks(400))
    for stopped, chunk in enumerate(chunks):
        assert items(list(Replay(history, chunk.position).chunks(7))) == items(chunks[stopped + 1 :])


def test_a_history_that_has_grown_is_another_edition(history: Path) -> None:
    [*_, last] = Replay(history).chunks()
    write_history(history, two_lines(1, 1800))
    again = list(Replay(history, last.position).chunks())
    assert {chunk.edition for chunk in again} == {last.edition + 1}
    assert len(items(again)) == 1800


def test_without_a_history_it_says_how_to_make_one(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="pbm intake"):
        Replay(tmp_path / "history")
