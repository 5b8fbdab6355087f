"""Notes that people enter while a watch runs: kept at once, read once, whatever happens to reader, writer or file."""

import sqlite3
from dataclasses import replace
from pathlib import Path

import pytest

from pbm.errors import InputError
from pbm.io import bench_store
from pbm.io.bench_store import BenchNotes, Note, add_note
from pbm.records.event import LabEvent
from pbm.records.reading import Chunk

NOTE = Note(1_930_000_000_000_000, "reagent lot", "sodium", "line-2", "lot 4711", "kim", 1_930_000_060_000_000)


def details(chunk: Chunk | None) -> list[str]:
    return [] if chunk is None else [item.detail for item in chunk.items if isinstance(item, LabEvent)]


def add(path: Path, *texts: str) -> None:
    for text in texts:
        add_note(path, replace(NOTE, detail=text))


def test_a_note_is_read_as_an_event(tmp_path: Path) -> None:
    path = tmp_path / "bench.sqlite"
    notes = BenchNotes(path, "")
    assert notes.new() is None
    add_note(path, NOTE)
    chunk = notes.new()
    assert chunk is not None and chunk.source == "bench notes"
    assert chunk.items == [LabEvent(NOTE.time, "reagent lot", "sodium", "line-2", "lot 4711", "note by kim", NOTE.at)]
    assert notes.new() is None


def test_a_reader_goes_on_after_the_position_that_was_kept(tmp_path: Path) -> None:
    path = tmp_path / "bench.sqlite"
    add(path, "one", "two")
    first = BenchNotes(path, "").new()
    assert first is not None and details(first) == ["one", "two"]
    add(path, "three")
    assert details(BenchNotes(path, first.position).new()) == ["three"]
    assert details(BenchNotes(path, "").new()) == ["one", "two", "three"], (
        "a reader that was killed before it kept them"
    )


def test_many_notes_are_read_in_several_pieces(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(bench_store, "MOST", 3)
    path = tmp_path / "bench.sqlite"
    add(path, *map(str, range(8)))
    notes = BenchNotes(path, "")
    assert [details(notes.new()) for _ in range(4)] == [["0", "1", "2"], ["3", "4", "5"], ["6", "7"], []]


def test_a_file_in_the_place_of_the_old_one_is_read_from_its_begin(tmp_path: Path) -> None:
    path = tmp_path / "bench.sqlite"
    add(path, "one", "two")
    notes = BenchNotes(path, "")
    notes.new()
    path.unlink()
    add(path, "new")
    assert details(notes.new()) == ["new"]


def test_while_someone_writes_the_watch_reads_later(tmp_path: Path) -> None:
    path = tmp_path / "bench.sqlite"
    add(path, "one")
    notes, writer = BenchNotes(path, ""), sqlite3.connect(path, isolation_level=None)
    writer.execute("BEGIN EXCLUSIVE")
    assert notes.new() is None
    writer.execute("ROLLBACK")
    writer.close()
    assert details(notes.new()) == ["one"]


def test_a_note_that_cannot_be_kept_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="Nothing was noted"):
        add_note(tmp_path / "no" / "bench.sqlite", NOTE)


def test_a_file_that_is_no_store_of_notes_is_left_alone(tmp_path: Path) -> None:
    (tmp_path / "bench.sqlite").write_text("something else")
    assert BenchNotes(tmp_path / "bench.sqlite", "").new() is None
