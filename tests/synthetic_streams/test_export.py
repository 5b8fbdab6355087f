"""The export read back by a naive reader that knows nothing of how it was made: the account is exact."""

import csv
import hashlib
import json
from collections import Counter
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from synthetic_streams import Laboratory, write_laboratory
from synthetic_streams.analytes import BY_KEY, STREAMS, stream_name
from synthetic_streams.clock import utc
from synthetic_streams.mess import MessCounts
from synthetic_streams.rows import COLUMNS
from synthetic_streams.write import LIVE_DAYS, live_start
from tests.synthetic_streams.conftest import DAYS, SEED, VOLUME, Written

CODES = {spelling: a.key for a in BY_KEY.values() for spelling in (a.code, *a.spellings)}
UNITS = {a.key: a.unit for a in BY_KEY.values()}


def sort_out(written: Written) -> tuple[list[tuple[str, str, str, str]], dict[str, list[int]]]:
    """Take or leave out each row: taken (stream, time, result, test) in file order, and lines left out by reason."""
    taken: list[tuple[str, str, str, str]] = []
    left: dict[str, list[int]] = {}
    seen_rows: set[tuple[str, ...]] = set()
    seen_tests: set[tuple[str, str, str]] = set()
    for number, fields in written.rows:
        row = dict(zip(COLUMNS, fields, strict=False))
        reason = _reason(fields, row, seen_rows, seen_tests)
        seen_rows.add(tuple(fields))
        if reason:
            left.setdefault(reason, []).append(number)
            continue
        seen_tests.add((row["specimen"], CODES[row["test"]], row["line"]))
        taken.append((f"{CODES[row['test']]}@{row['line']}", row["reported_at"], row["result"], row["test"]))
    return taken, left


def _reason(
    fields: list[str], row: dict[str, str], rows: set[tuple[str, ...]], tests: set[tuple[str, str, str]]
) -> str | None:
    if len(fields) != len(COLUMNS):
        return "wrong_field_count"
    if row["kind"] != "P":
        return {"Q": "control", "F": "proficiency"}[row["kind"]]
    if row["test"] not in CODES:
        return "unmapped_test"
    if not row["result"].lstrip("<>").replace(".", "", 1).isdigit():
        return "comment"
    if row["unit"] != UNITS[CODES[row["test"]]]:
        return "other_unit"
    if tuple(fields) in rows:
        return "exact_duplicate"
    return "rerun" if (row["specimen"], CODES[row["test"]], row["line"]) in tests else None


def test_the_account_adds_up_and_is_what_a_naive_reader_finds(written: Written) -> None:
    told = written.truth["export"]
    taken, left = sort_out(written)
    assert told["rows"] == len(written.rows) == len(taken) + sum(map(len, left.values()))
    assert told["blank_lines"] == written.blank_lines == 2
    assert told["left_out"] == {reason: len(lines) for reason, lines in left.items()}
    assert told["source_lines"] == {reason: lines for reason, lines in left.items() if reason != "control"}
    assert told["taken"] == len(taken)
    assert told["taken_by_stream"] == dict(Counter(stream for stream, *_ in taken))


def test_censored_other_spellings_and_late_lines_are_counted(written: Written) -> None:
    told = written.truth["export"]
    taken, _ = sort_out(written)
    assert told["censored_low"] == sum(result.startswith("<") for _, _, result, _ in taken) > 0
    assert told["censored_high"] == sum(result.startswith(">") for _, _, result, _ in taken)
    assert told["other_spelling"] == sum(test == "Na" for *_, test in taken) > 0
    times = np.array([datetime.fromisoformat(fields[0]).timestamp() for _, fields in written.rows])
    assert told["out_of_order"] == int((times < np.maximum.accumulate(times)).sum()) > 0
    comments = Counter(fields[3] for _, fields in written.rows if len(fields) == len(COLUMNS))
    assert told["comments"] == {text: comments[text] for text in ("HEM", "QNS", "see note")}


def test_the_mess_is_there_in_the_numbers_asked_for(written: Written) -> None:
    told = written.truth["export"]
    ordinary = told["rows"] - sum(
        told["left_out"][r] for r in ("proficiency", "unmapped_test", "rerun", "exact_duplicate")
    )
    asked = MessCounts().scaled(ordinary)
    assert told["left_out"]["rerun"] == asked.reruns
    assert told["left_out"]["exact_duplicate"] == asked.duplicates
    assert told["left_out"]["proficiency"] == asked.proficiency
    assert told["left_out"]["unmapped_test"] == asked.unmapped
    assert told["comments"] == {"HEM": asked.hem, "QNS": asked.qns, "see note": asked.see_note}
    assert told["other_spelling"] == asked.other_spelling
    assert told["left_out"]["wrong_field_count"] == asked.cut_short == 1
    assert told["left_out"]["control"] >= 2 * 3 * DAYS * len(STREAMS)


def test_what_is_taken_is_what_the_laboratory_measured(written: Written) -> None:
    laboratory = Laboratory(DAYS + LIVE_DAYS, VOLUME, SEED)
    taken, left = sort_out(written)
    read: dict[str, Counter[tuple[int, str]]] = {}
    for stream, at, result, _ in taken:
        read.setdefault(stream, Counter())[(utc(datetime.fromisoformat(at)), result)] += 1
    lost = 0
    for analyte, line in STREAMS:
        sample = laboratory.sample(analyte, line)
        past = sample.rows(sample.time < live_start(DAYS))
        measured = Counter(zip(past.time.tolist(), past.text.tolist(), strict=True))
        found = read[stream_name(analyte, line)]
        assert not found - measured
        lost += (measured - found).total()
    assert lost == sum(len(left[reason]) for reason in ("comment", "other_unit", "wrong_field_count"))


def test_the_unit_slip_lasts_four_hours_of_one_day_on_glucose(written: Written) -> None:
    slipped = [fields for _, fields in written.rows if fields[4] == "mg/dL"]
    times = [datetime.fromisoformat(fields[0]) for fields in slipped]
    assert {fields[1] for fields in slipped} == {"GLUC"}
    assert {at.date() for at in times} == {times[0].date()}
    assert {at.hour for at in times} <= {14, 15, 16, 17}
    assert times[0].weekday() == 2
    assert 80 < np.median([float(fields[3]) for fields in slipped]) < 160


def test_a_rerun_comes_minutes_after_its_first_run_with_another_value(written: Written) -> None:
    by_line = dict(written.rows)
    reruns = [by_line[number] for number in written.truth["export"]["source_lines"]["rerun"]]
    firsts = {
        (f[5], f[1], f[2]): f for f in reversed(list(by_line.values())) if len(f) == len(COLUMNS) and f[11] == "P"
    }
    for again in reruns:
        first = firsts[(again[5], again[1].upper(), again[2])]
        minutes = (datetime.fromisoformat(again[0]) - datetime.fromisoformat(first[0])).total_seconds() / 60
        assert 4 <= minutes < 16
        assert again[3] != first[3]


def test_history_ends_where_the_live_days_begin(written: Written) -> None:
    start = live_start(DAYS)
    history = [utc(datetime.fromisoformat(fields[0])) for _, fields in written.rows if fields[11:] == ["P"]]
    with (written.folder / "live.csv").open(encoding="utf-8", newline="") as file:
        live = [utc(datetime.fromisoformat(row["reported_at"])) for row in csv.DictReader(file)]
    assert max(history) < start + 16 * 60 * 1_000_000
    assert start <= min(live) and live == sorted(live)


def digests(folder: Path) -> dict[str, str]:
    files = sorted(path for path in folder.rglob("*") if path.is_file())
    return {str(path.relative_to(folder)): hashlib.sha256(path.read_bytes()).hexdigest() for path in files}


def test_the_same_seed_writes_the_same_bytes_and_another_seed_others(written: Written, tmp_path: Path) -> None:
    write_laboratory(tmp_path / "again", DAYS, VOLUME, SEED)
    write_laboratory(tmp_path / "other", DAYS, VOLUME, SEED + 1)
    same, other = digests(tmp_path / "again"), digests(tmp_path / "other")
    assert same == digests(written.folder)
    assert {name for name, digest in other.items() if digest == same[name]} == {"lab.toml"}


def test_the_history_crosses_the_clock_change_of_march(tmp_path: Path) -> None:
    told = write_laboratory(tmp_path, days=90, volume=0.05)
    content = (tmp_path / "extract" / "export.csv").read_bytes()
    times = [line.split(",")[0] for line in content.decode().splitlines()[1:] if line]
    assert told.bytes == len(content)
    # On 30 March 00:00-01:00 became 01:00+00:00, so that whole local day already has the summer offset.
    assert {at[19:] for at in times if at < "2031-03-30"} == {"-01:00"}
    assert {at[19:] for at in times if at >= "2031-03-30"} == {"+00:00"}
    assert not [at for at in times if at.startswith("2031-03-30T00")]


def test_controls_are_a_file_of_their_own_and_are_the_same_in_the_export(written: Written) -> None:
    with (written.folder / "controls.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    exported = Counter((f[0], f[2], f[3], CODES[f[1]]) for _, f in written.rows if f[11:] == ["Q"])
    assert Counter((r["time"], r["line"], r["value"], r["analyte"]) for r in rows) == exported
    assert {r["verdict"] for r in rows} == {"accepted", "rejected"}
    assert sum(r["verdict"] == "rejected" for r in rows) < 0.04 * len(rows)


def test_live_files_tell_the_same_results_and_the_fault_is_in_them(written: Written) -> None:
    with (written.folder / "live.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    told = [json.loads(line) for line in (written.folder / "live.ndjson").read_text(encoding="utf-8").splitlines()]
    assert [(r["result"], r["unit"], r["specimen"], r["line"], CODES[r["test"]], r["location"]) for r in rows] == [
        (t["value"], t["unit"], t["specimen"], t["analyser"], t["analyte"], t["ward"]) for t in told
    ]
    assert [(r["sex"], r["age"]) for r in rows] == [(t["sex"], t["age"]) for t in told]
    assert [utc(datetime.fromisoformat(r["reported_at"])) for r in rows] == [
        utc(datetime.fromisoformat(t["time"])) for t in told
    ]
    (fault,) = json.loads((written.folder / "faults.json").read_text(encoding="utf-8"))["faults"]
    assert (fault["stream"], fault["kind"], fault["size"], fault["unit"]) == ("sodium@line-2", "shift", 0.75, "TEa")
    live = {
        (t["specimen"], t["time"]): t["value"] for t in told if (t["analyte"], t["analyser"]) == ("sodium", "line-2")
    }
    for result in fault["results"]:
        assert live[(result["specimen"], result["time"])] == result["reported"]
        assert result["error"] == 3.0
        assert result["time"] >= fault["onset"]
        assert int(result["reported"]) - int(result["without"]) == 3
    assert len(fault["results"]) == sum(t["time"] >= fault["onset"] for t in told if (t["specimen"], t["time"]) in live
                                        and (t["analyte"], t["analyser"]) == ("sodium", "line-2"))  # fmt: skip


def test_events_of_the_live_days_are_those_of_the_truth_and_of_the_controls(tmp_path: Path) -> None:
    write_laboratory(tmp_path, days=60, volume=0.2)
    rows = [line.split(",") for line in (tmp_path / "live-events.csv").read_text().splitlines()]
    assert rows[0] == ["time", "event", "analyte", "analyser", "detail"]
    assert [row[0] for row in rows[1:]] == sorted(row[0] for row in rows[1:])
    truth = json.loads((tmp_path / "truth.json").read_text())
    begin = truth["live_start"]
    steps = {
        (step["time"], "reagent lot" if step["new_lot"] else "calibration", stream)
        for stream, told in truth["levels"].items()
        for step in told
        if step["time"] >= begin
    }
    of_levels = {(_utc(row[0]), row[1], f"{row[2]}@{row[3]}") for row in rows[1:] if not row[1].startswith("control")}
    assert of_levels == steps and steps
    controls = [line.split(",") for line in (tmp_path / "live-controls.csv").read_text().splitlines()[1:]]
    last_level = sorted((row[0], f"control {row[5]}", row[1], row[2]) for row in controls if row[3] == "2")
    assert sorted(tuple(row[:4]) for row in rows[1:] if row[1].startswith("control")) == last_level


def _utc(text: str) -> str:
    return datetime.fromisoformat(text).astimezone(UTC).isoformat().replace("+00:00", "Z")
