"""A history is written whole or not at all; new rows join the old ones."""

from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from pbm.errors import InputError
from pbm.io.history import history_mark, read_extracts, read_results, read_streams, set_aside, stream_sizes
from pbm.io.history_writer import HistoryWriter
from pbm.records.intake import LEFT_OUT_SCHEMA, RESULT_SCHEMA, ParsedBlock, Sifted, TakenExtract
from pbm.records.stream import StreamName

NA, K, TSH = StreamName("sodium", "a"), StreamName("potassium", "a"), StreamName("tsh", "b/c")


def block(*counts: tuple[StreamName, int], first: int = 2, left: int = 1) -> ParsedBlock:
    """Rows of streams, whose values are their lines; and `left` rows left out."""
    rows = sum(count for _, count in counts)
    lines = list(range(first, first + rows))
    columns = {"time": lines, "value": [float(line) for line in lines], "censor": [0] * rows, "line": lines}
    arrays = [pa.array(columns.get(field.name, ["x"] * rows)).cast(field.type) for field in RESULT_SCHEMA]
    gone = [{"file": "x", "line": 9, "reason": "because", "found": "", "stream": ""}] * left
    return ParsedBlock(pa.table(arrays, schema=RESULT_SCHEMA), counts, pa.Table.from_pylist(gone, LEFT_OUT_SCHEMA))


def keep_all(name: StreamName, results: pa.Table) -> Sifted:
    return Sifted(results, LEFT_OUT_SCHEMA.empty_table())


def taken(name: str) -> TakenExtract:
    return TakenExtract(name, f"sha of {name}", "sha of lab", "2031-03-02T07:00:00+00:00", 3, 2)


def take(folder: Path, *blocks: ParsedBlock, name: str = "a.csv") -> None:
    with HistoryWriter(folder) as writer:
        for one in blocks:
            writer.add(one)
        assert list(writer.merge(keep_all)) == writer.streams
        writer.put_in_place([*read_extracts(folder), taken(name)])


def everything(folder: Path) -> list[str]:
    """Names of all files under a folder."""
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file())


def test_blocks_become_one_file_a_stream_in_the_order_they_came(tmp_path: Path) -> None:
    history = tmp_path / "history"
    take(history, block((NA, 2), (K, 1)), block((K, 2), (TSH, 1), first=10))
    assert stream_sizes(history) == {NA: 2, K: 3, TSH: 1}
    assert read_results(history, K)["line"].to_pylist() == [4, 10, 11]
    assert read_results(history, NA).schema.equals(RESULT_SCHEMA)
    assert len(pq.read_table(history / "left-out.parquet")) == 2
    assert read_extracts(history) == [taken("a.csv")]
    assert [path.name for path in tmp_path.iterdir()] == ["history"]


def test_new_rows_join_the_old_ones_and_other_streams_stay(tmp_path: Path) -> None:
    history = tmp_path / "history"
    take(history, block((NA, 2), (K, 1)))
    potassium = (history / "stream=potassium@a" / "results.parquet").read_bytes()
    take(history, block((NA, 1), (TSH, 1), first=20), name="b.csv")
    assert read_results(history, NA)["line"].to_pylist() == [2, 3, 20]
    assert (history / "stream=potassium@a" / "results.parquet").read_bytes() == potassium
    assert read_streams(history) == [K, NA, TSH]
    assert len(pq.read_table(history / "left-out.parquet")) == 2
    assert read_extracts(history) == [taken("a.csv"), taken("b.csv")]


def test_what_sifting_leaves_out_is_written_down(tmp_path: Path) -> None:
    history = tmp_path / "history"
    gone = pa.Table.from_pylist(
        [{"file": "x", "line": 2, "reason": "duplicate", "found": "", "stream": str(NA)}], LEFT_OUT_SCHEMA
    )
    with HistoryWriter(history) as writer:
        writer.add(block((NA, 2), left=0))
        list(writer.merge(lambda name, results: Sifted(results.slice(1), gone)))
        writer.put_in_place([])
    assert pq.read_table(history / "left-out.parquet").to_pylist() == gone.to_pylist()
    assert stream_sizes(history) == {NA: 1}


def test_the_key_of_the_patients_stays_with_the_history_and_is_for_its_owner_alone(tmp_path: Path) -> None:
    history = tmp_path / "history"
    take(history, block((NA, 1)))
    key = (history / "patient.key").read_bytes()
    assert (history / "patient.key").stat().st_mode & 0o077 == 0
    take(history, block((NA, 1)), name="b.csv")
    assert (history / "patient.key").read_bytes() == key
    with HistoryWriter(tmp_path / "other") as writer:
        assert writer.patient_key != key


@pytest.mark.parametrize("moment", ["add", "sift", "sync", "first rename", "second rename"])
@pytest.mark.parametrize("before", [True, False])
def test_ctrl_c_at_any_moment_leaves_the_old_history_and_nothing_beside_it(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, moment: str, before: bool
) -> None:
    history = tmp_path / "history"
    if before:
        take(history, block((NA, 2), (K, 1)))
        mark = history_mark(history)
    files = everything(tmp_path)
    renames: list[Path] = []

    whole_rename = Path.rename

    def stop(*given: object) -> Sifted:
        raise KeyboardInterrupt

    def rename(path: Path, target: Path) -> Path:
        renames.append(path)
        if len(renames) == {"first rename": 1, "second rename": 2 if before else 1}.get(moment):
            raise KeyboardInterrupt
        return whole_rename(path, target)

    monkeypatch.setattr(Path, "rename", rename)
    with pytest.raises(KeyboardInterrupt), HistoryWriter(history) as writer:
        writer.add(block((NA, 1), first=50))
        if moment == "add":
            raise KeyboardInterrupt
        list(writer.merge(stop if moment == "sift" else keep_all))
        if moment == "sync":
            monkeypatch.setattr("os.fsync", stop)
        writer.put_in_place([])
    assert everything(tmp_path) == files
    if before:
        assert history_mark(history) == mark


def test_a_history_set_aside_by_a_killed_intake_is_told_and_put_back(tmp_path: Path) -> None:
    history = tmp_path / "history"
    take(history, block((NA, 2)))
    mark = history_mark(history)
    history.rename(set_aside(history))
    with pytest.raises(InputError, match=r"An intake was cut off .* Rename .*history.before to .*history"):
        read_streams(history)
    with HistoryWriter(history):
        pass
    assert history_mark(history) == mark


def test_an_intake_that_another_overtook_changes_nothing(tmp_path: Path) -> None:
    history = tmp_path / "history"
    with HistoryWriter(history) as slow:
        slow.add(block((NA, 1)))
        take(history, block((K, 1)))
        list(slow.merge(keep_all))
        with pytest.raises(InputError, match="Another intake changed"):
            slow.put_in_place([taken("b.csv")])
    assert read_streams(history) == [K]


def test_too_many_streams_are_told_as_a_wrong_column(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("pbm.io.history_writer._MOST_STREAMS", 3)
    with (
        pytest.raises(InputError, match=r"extract.analyser really hold the analyser"),
        HistoryWriter(tmp_path / "h") as writer,
    ):
        writer.add(block(*((StreamName("sodium", f"s{i}"), 1) for i in range(4))))


def test_a_damaged_list_of_extracts_is_told(tmp_path: Path) -> None:
    history = tmp_path / "history"
    take(history, block((NA, 1)))
    (history / "extracts.json").write_text('[{"name": 1}]')
    with pytest.raises(InputError, match=r"extracts.json cannot be read"), HistoryWriter(history):
        pass
    assert [path.name for path in tmp_path.iterdir()] == ["history"]


def test_what_a_killed_intake_left_behind_is_removed_and_what_another_uses_is_not(tmp_path: Path) -> None:
    abandoned = tmp_path / ".history-killed"
    (abandoned / "new").mkdir(parents=True)
    (abandoned / "rows.arrow").write_bytes(b"half")
    with HistoryWriter(tmp_path / "history") as other:
        other.add(block((NA, 1)))
        take(tmp_path / "history", block((K, 1)))
        assert not abandoned.exists()
        assert [str(name) for name in other.merge(keep_all)] == ["sodium@a"]
