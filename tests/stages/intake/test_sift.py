"""Duplicates, reruns and repeats give way to the row that counts; nothing vanishes."""

from datetime import datetime, timedelta
from typing import Any

import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.records.intake import RESULT_SCHEMA, Sifted
from pbm.records.stream import StreamName
from pbm.stages.intake import sift

NAME = StreamName("sodium", "line-2")
START = datetime(2031, 3, 2, 7)


def table(*rows: dict[str, Any]) -> pa.Table:
    """Rows with `hours` from the start; by default in one extract, specimen by specimen."""
    default = {
        "value": 139.0,
        "censor": 0,
        "ward": "",
        "sex": "",
        "age": "",
        "priority": "",
        "lot": "",
        "patient": "",
        "file": "a.csv",
    }
    whole = [{**default, "specimen": f"S-{i}", "line": i + 2, "hours": 0.0, **row} for i, row in enumerate(rows)]
    times = [START + timedelta(hours=row["hours"]) for row in whole]
    columns = [times, *([row[name] for row in whole] for name in RESULT_SCHEMA.names[1:])]
    return pa.table(
        [pa.array(column).cast(field.type) for column, field in zip(columns, RESULT_SCHEMA, strict=True)],
        schema=RESULT_SCHEMA,
    )


def told(sifted: Sifted) -> tuple[list[int], list[tuple[int, str, str]]]:
    """Lines kept, in order of time; line, reason and what counts instead of those left out."""
    left = sifted.left_out.to_pylist()
    return sifted.results["line"].to_pylist(), sorted((row["line"], row["reason"], row["found"]) for row in left)


def test_results_come_in_order_of_time_and_equal_times_in_the_order_they_came() -> None:
    kept, left = told(sift(NAME, table({"hours": 2}, {"hours": 1}, {"hours": 1}, {"hours": 0}), 0))
    assert kept == [5, 3, 4, 2]
    assert left == []


def test_the_same_specimen_time_and_value_again_is_a_duplicate() -> None:
    kept, left = told(sift(NAME, table({"specimen": "S"}, {}, {"specimen": "S", "ward": "ED"}), 0))
    assert kept == [2, 3]
    assert left == [(4, "duplicate", "line 2")]


def test_another_run_of_the_specimen_within_a_day_is_a_rerun_and_the_first_in_time_counts() -> None:
    rows: list[dict[str, Any]] = [
        {"specimen": "S", "hours": 0.2, "value": 140},
        {"specimen": "S", "value": 120},
        {"specimen": "S", "hours": 24},
    ]
    kept, left = told(sift(NAME, table(*rows), 0))
    assert kept == [3]
    assert left == [(2, "rerun of the specimen", "line 3"), (4, "rerun of the specimen", "line 3")]


def test_a_duplicate_of_a_rerun_is_told_as_its_duplicate() -> None:
    again = {"specimen": "S", "hours": 0.1, "value": 150}
    assert told(sift(NAME, table({"specimen": "S"}, again, again), 0))[1] == [
        (3, "rerun of the specimen", "line 2"),
        (4, "duplicate", "line 3"),
    ]


def test_a_specimen_number_used_again_after_more_than_a_day_is_another_specimen() -> None:
    kept, left = told(
        sift(NAME, table({"specimen": "S"}, {"specimen": "S", "hours": 24.01}, {"specimen": "S", "hours": 30}), 0)
    )
    assert kept == [2, 3]
    assert left == [(4, "rerun of the specimen", "line 3")]


def test_the_censor_makes_a_different_value() -> None:
    rows: list[dict[str, Any]] = [{"specimen": "S"}, {"specimen": "S", "censor": -1}]
    assert told(sift(NAME, table(*rows), 0))[1] == [(3, "rerun of the specimen", "line 2")]


def test_without_specimens_like_rows_of_one_extract_both_count() -> None:
    bare = {"specimen": ""}
    assert told(sift(NAME, table(bare, bare, {**bare, "value": 140}), 0)) == ([2, 3, 4], [])


def test_without_specimens_rows_that_another_extract_repeats_count_once_each() -> None:
    bare, again = {"specimen": ""}, {"specimen": "", "file": "b.csv"}
    kept, left = told(sift(NAME, table(bare, bare, again, again, again), 0))
    assert kept == [2, 3, 6]
    assert left == [(4, "duplicate", "line 2 of a.csv"), (5, "duplicate", "line 3 of a.csv")]


def test_without_specimens_a_row_that_differs_in_anything_known_is_no_duplicate() -> None:
    for name in ("ward", "sex", "age", "patient"):
        assert len(sift(NAME, table({"specimen": ""}, {"specimen": "", "file": "b.csv", name: "x"}), 0).results) == 2


def test_repeats_of_a_patient_are_left_out_where_the_laboratory_limits_them() -> None:
    rows = [{"patient": "p", "hours": hours} for hours in (0, 5, 12, 13, 24, 26)] + [{"patient": ""}, {"patient": ""}]
    kept, left = told(sift(NAME, table(*rows), 12))
    assert kept == [2, 8, 9, 5, 7]
    assert left == [
        (3, "same patient within 12 h", "line 2"),
        (4, "same patient within 12 h", "line 2"),
        (6, "same patient within 12 h", "line 5"),
    ]
    assert len(sift(NAME, table(*rows), 0).results) == len(rows)


def test_a_rerun_does_not_start_the_hours_of_its_patient() -> None:
    rows: list[dict[str, Any]] = [
        {"specimen": "S", "patient": "p"},
        {"specimen": "S", "patient": "p", "hours": 10},
        {"patient": "p", "hours": 13},
    ]
    assert told(sift(NAME, table(*rows), 12))[0] == [2, 4]


def test_an_empty_stream_stays_empty() -> None:
    assert told(sift(NAME, RESULT_SCHEMA.empty_table(), 12)) == ([], [])


some_row = st.fixed_dictionaries(
    {
        "specimen": st.sampled_from(["", "A", "B", "C"]),
        "hours": st.sampled_from([0.0, 1.0, 23.0, 24.0, 25.0, 49.0]),
        "value": st.sampled_from([139.0, 140.0]),
        "patient": st.sampled_from(["", "p", "q"]),
        "file": st.sampled_from(["a.csv", "b.csv"]),
    }
)


def naive(rows: list[dict[str, Any]], repeat_hours: float) -> list[int]:
    """Lines that count, by the rules as one would say them: row by row in order of time."""
    ordered = sorted((row | {"line": i + 2} for i, row in enumerate(rows)), key=lambda row: row["hours"])
    runs: dict[str, float] = {}
    patients: dict[str, float] = {}
    copies: dict[Any, dict[str, int]] = {}
    kept = []
    for row in ordered:
        specimen, hours, patient = row["specimen"], row["hours"], row["patient"]
        if specimen:
            if specimen in runs and hours - runs[specimen] <= 24:
                continue
            runs[specimen] = hours
        else:
            counts = copies.setdefault((hours, row["value"], patient), {})
            counts[row["file"]] = counts.get(row["file"], 0) + 1
            if counts[row["file"]] <= max((n for file, n in counts.items() if file != row["file"]), default=0):
                continue
        if repeat_hours and patient:
            if patient in patients and hours - patients[patient] <= repeat_hours:
                continue
            patients[patient] = hours
        kept.append(row["line"])
    return kept


@pytest.mark.parametrize("repeat_hours", [0, 12])
@given(rows=st.lists(some_row, max_size=14))
def test_sifting_equals_the_rules_said_row_by_row(repeat_hours: float, rows: list[dict[str, Any]]) -> None:
    sifted = sift(NAME, table(*rows), repeat_hours)
    kept, left = told(sifted)
    assert kept == naive(rows, repeat_hours)
    assert sorted([*kept, *(line for line, _, _ in left)]) == list(range(2, 2 + len(rows)))


@given(rows=st.lists(some_row, max_size=14))
def test_when_everything_comes_again_in_another_extract_nothing_changes(rows: list[dict[str, Any]]) -> None:
    once = [{**row, "file": "a.csv"} for row in rows]
    again = [{**row, "file": "later.csv"} for row in rows]
    first = sift(NAME, table(*once), 12).results
    assert sift(NAME, pa.concat_tables([first, table(*again)]), 12).results.equals(first)
