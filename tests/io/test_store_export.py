"""A store as files: every row, no formula for a spreadsheet, numbers as numbers, no token of a patient."""

import csv
import json
import tracemalloc
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from pbm.io import store_export
from pbm.io.store import Store
from pbm.io.store_export import EXPORTED, export_store
from pbm.io.store_place import Place
from pbm.records.event import LabEvent
from pbm.records.message import Annotation
from pbm.records.notice import Notice
from pbm.records.snapshot import Batch, KeptResult
from tests.io.store_samples import ALARM, FEED, batch, begun, results_kept
from tests.live_laboratory import SODIUM, START, results

DETAILS = ["=1+1", "+cmd", "-2+3", "@sum", "\tx", "R-2031-07", "-5.2", "+4", "1e3", 'O\'Tern, "ok"', "Übersee µ"]


@pytest.fixture
def filled(place: Place) -> Place:
    some = [
        replace(one, value=value, patient="token-of-a-patient")
        for one, value in zip(results([0] * 3), (-1.5, 0.1 + 0.2, 7), strict=True)
    ]
    with begun(place) as store:
        store.keep(batch(results=[KeptResult(one, "", FEED) for one in some]))
        events = [LabEvent(START, "note", "sodium", "line-1", detail, "by hand", START) for detail in DETAILS]
        annotation = Annotation(SODIUM, "=31-1", START, "C", "<5", START, "live.csv", 7)
        notice = Notice(START, "quiet", "", "line-1", "line-1 quiet for 45 min, 20 expected", START + 1)
        store.keep(Batch(events=[(0, one) for one in events], annotations=[annotation], notices=[notice]))
    return place


def read(path: Path) -> list[dict[str, str]]:
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def test_every_table_becomes_a_file_with_all_of_its_rows(filled: Place, tmp_path: Path) -> None:
    counts = {path.name: count for path, count in export_store(filled, tmp_path, as_json=False)}
    assert counts == {
        "audit.csv": 12, "events.csv": 11, "notices.csv": 1, "annotations.csv": 1, "alarms.csv": 1, "results.csv": 3
    }  # fmt: skip
    assert all(len(read(tmp_path / name)) == count for name, count in counts.items())


def test_numbers_come_out_to_the_last_bit_and_times_in_utc(filled: Place, tmp_path: Path) -> None:
    list(export_store(filled, tmp_path, as_json=False))
    first, second, _ = read(tmp_path / "results.csv")
    assert (first["analyte"], first["analyser"], first["source"]) == ("sodium", "line-1", "live.csv")
    assert first["time"] == "2031-02-27T23:06:40Z"
    assert first["value"] == "-1.5" and float(second["value"]).hex() == (0.1 + 0.2).hex()
    alarm = read(tmp_path / "alarms.csv")[0]
    assert (alarm["side"], float(alarm["value"]), alarm["shadow"]) == ("HIGH", ALARM.value, "false")


def test_what_a_spreadsheet_would_take_for_a_formula_is_guarded_and_a_number_is_not(
    filled: Place, tmp_path: Path
) -> None:
    list(export_store(filled, tmp_path, as_json=False))
    assert [row["detail"] for row in read(tmp_path / "events.csv")] == [
        "'=1+1", "'+cmd", "'-2+3", "'@sum", "'\tx", "R-2031-07", "-5.2", "+4", "1e3", "O'Tern, \"ok\"", "Übersee µ"
    ]  # fmt: skip
    assert read(tmp_path / "annotations.csv")[0]["specimen"] == "'=31-1"


def test_json_lines_keep_texts_as_they_are_and_numbers_as_numbers(filled: Place, tmp_path: Path) -> None:
    list(export_store(filled, tmp_path, as_json=True))
    lines = [json.loads(line) for line in (tmp_path / "events.ndjson").read_text(encoding="utf-8").splitlines()]
    assert [one["detail"] for one in lines] == DETAILS
    some = [json.loads(line) for line in (tmp_path / "results.ndjson").read_text(encoding="utf-8").splitlines()]
    assert [one["value"] for one in some] == [-1.5, 0.1 + 0.2, 7.0]


def test_no_token_of_a_patient_leaves_the_store(filled: Place, tmp_path: Path) -> None:
    for as_json in (False, True):
        list(export_store(filled, tmp_path, as_json=as_json))
    files = [path for path in tmp_path.iterdir() if path.suffix in (".csv", ".ndjson")]
    assert len(files) == 2 * len(EXPORTED)
    assert not any(b"token" in path.read_bytes() for path in files)


def test_rows_are_read_some_at_a_time(place: Place, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(store_export, "_STEP", 7)
    with begun(place) as store:
        store.keep(batch(results=results_kept(1, 50), alarms=[]))
        counts = {path.stem: count for path, count in export_store(place, tmp_path, as_json=False)}
    assert counts["results"] == 50
    assert [int(row["seq"]) for row in read(tmp_path / "results.csv")] == list(range(1, 51))


def test_memory_does_not_grow_with_the_store(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(store_export, "_STEP", 500)
    peaks = []
    with begun(path := tmp_path / "watch.sqlite") as store:
        for n, count in enumerate((2_000, 18_000)):
            store.keep(batch(results=results_kept(100_000 * n, count), alarms=[], set_aside=[]))
            tracemalloc.start()
            list(export_store(path, tmp_path, as_json=False))
            peaks.append(tracemalloc.get_traced_memory()[1])
            tracemalloc.stop()
    assert len(read(tmp_path / "results.csv")) == 20_000
    assert peaks[1] < 1.5 * peaks[0]


def test_an_export_that_breaks_off_leaves_the_older_files_whole(
    filled: Place, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    list(export_store(filled, tmp_path, as_json=False))
    before = {path.name: path.read_bytes() for path in tmp_path.glob("*.csv")}
    with Store(filled) as store:
        store.keep(Batch(results=results_kept(900), positions={"live.csv": "30"}))
    pages = store_export._pages

    def broken(*given: object) -> Iterator[object]:
        yield from pages(*given)  # type: ignore[arg-type]
        raise KeyboardInterrupt

    monkeypatch.setattr(store_export, "_pages", broken)
    with pytest.raises(KeyboardInterrupt):
        list(export_store(filled, tmp_path, as_json=False))
    assert {path.name: path.read_bytes() for path in tmp_path.glob("*.csv")} == before
    assert not [path for path in tmp_path.iterdir() if path.name.startswith(".audit")]
