"""Rows of text become results of streams, or are left out for one reason that is told."""

from datetime import UTC, datetime

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.records.stream import StreamName
from pbm.stages.intake import RowReader
from tests.stages.intake.laboratory import KEY, ROW, block, lab, left, parse


@pytest.mark.parametrize("encoded", [False, True])
def test_a_row_becomes_a_result_of_its_stream(encoded: bool) -> None:
    parsed = parse({"value": "<138", "ward": " ED "}, encoded=encoded)
    row = parsed.results.to_pylist()[0]
    assert parsed.streams == ((StreamName("sodium", "line-2"), 1),)
    assert row["time"] == datetime(2031, 3, 2, 7, 14, 5, tzinfo=UTC)
    assert (row["value"], row["censor"], row["specimen"], row["ward"], row["age"]) == (138.0, -1, "S-1", "ED", "60-74")
    assert (row["file"], row["line"], row["sex"]) == ("export.csv", 2, "F")
    assert left(parsed) == []


def test_rows_lie_stream_by_stream_in_the_order_of_the_file() -> None:
    rows = [{"analyser": one, "value": str(100 + i)} for i, one in enumerate(["b", "a", "b", "c", "a"])]
    parsed = parse(*rows)
    assert [(str(name), count) for name, count in parsed.streams] == [("sodium@b", 2), ("sodium@a", 2), ("sodium@c", 1)]
    assert parsed.results["value"].to_pylist() == [100, 102, 101, 104, 103]


@pytest.mark.parametrize(
    ("change", "reason", "found", "stream"),
    [
        ({"time": "", "analyte": "", "value": " "}, "blank line", "", ""),
        ({"time": "reported_at", "analyte": "test", "value": "result", "kind": "kind"}, "repeated header line", "", ""),
        ({"kind": "Q"}, "not a patient result", "Q", "sodium@line-2"),
        ({"analyte": "LIPAEMIA"}, "unknown test", "LIPAEMIA", ""),
        ({"analyte": "na"}, "unknown test", "na", ""),
        ({"analyte": "GLU", "ward": "DIAL"}, "ward is left out", "DIAL", "glucose@line-2"),
        ({"analyser": " "}, "no analyser given", "", ""),
        ({"analyser": "x" * 61}, "not the name of an analyser", "x" * 40, f"sodium@{'x' * 61}"),
        ({"value": ""}, "no value", "", "sodium@line-2"),
        ({"value": "HEM"}, "not a number", "HEM", "sodium@line-2"),
        ({"value": "remark " * 20}, "not a number", ("remark " * 20)[:40], "sodium@line-2"),
        ({"unit": "mg/dL"}, "unit is not mmol/L", "mg/dL", "sodium@line-2"),
        ({"unit": "mEq/L"}, "unit is not mmol/L", "mEq/L", "sodium@line-2"),
        ({"unit": ""}, "no unit given", "", "sodium@line-2"),
        ({"time": " "}, "no time", "", "sodium@line-2"),
        ({"time": "soon"}, "not a time", "soon", "sodium@line-2"),
        ({"time": "2031-03-30T00:30:00"}, "time skipped by the clocks", "2031-03-30T00:30:00", "sodium@line-2"),
        ({"value": "0"}, "outside the plausible range", "0", "sodium@line-2"),
        ({"value": ">99999"}, "outside the plausible range", ">99999", "sodium@line-2"),
    ],
)
def test_a_row_is_left_out_with_its_reason(change: dict[str, str], reason: str, found: str, stream: str) -> None:
    parsed = parse({}, change, {"analyte": "GLU", "unit": "mmol/l", "value": "5.5"})
    assert left(parsed) == [(3, reason, found, stream)]
    assert parsed.results["line"].to_pylist() == [2, 4]


def test_the_first_reason_in_order_is_the_one_told() -> None:
    everything = {"kind": "Q", "analyte": "X", "value": "HEM", "unit": "mg/dL", "time": "soon"}
    assert left(parse(everything))[0][1] == "not a patient result"
    assert left(parse({**everything, "kind": "P"}))[0][1] == "unknown test"
    assert left(parse({**everything, "kind": "P", "analyte": "NA"}))[0][1] == "not a number"


def test_a_unit_is_never_converted() -> None:
    parsed = parse({"analyte": "GLU", "value": "99", "unit": "mg/dL"})
    assert len(parsed.results) == 0


def test_without_a_column_of_analysers_they_are_pooled() -> None:
    parsed = parse({}, {"analyser": "other"}, without=("analyser",))
    assert [str(name) for name, _ in parsed.streams] == ["sodium@pooled"]


def test_columns_that_the_extract_lacks_leave_nothing_out() -> None:
    parsed = parse(
        {"analyte": "GLU", "value": "5"}, without=("unit", "kind", "ward", "specimen", "age", "patient", "analyser")
    )
    row = parsed.results.to_pylist()[0]
    assert (row["ward"], row["specimen"], row["patient"]) == ("", "", "")


def test_a_decimal_comma_is_read_where_the_block_writes_one() -> None:
    assert parse({"value": "138,5"}, decimal=",").results["value"].to_pylist() == [138.5]
    assert left(parse({"value": "138,5"}))[0][1] == "not a number"


def test_a_patient_is_kept_as_a_token_that_needs_the_key() -> None:
    rows = [{"patient": "P-1"}, {"patient": "P-2"}, {"patient": "P-1"}, {"patient": ""}]
    tokens = parse(*rows).results["patient"].to_pylist()
    assert tokens[0] == tokens[2] != tokens[1]
    assert tokens[3] == ""
    assert "P-1" not in tokens[0]
    other = RowReader(lab(), b"another key").parse(block(*rows)).results["patient"].to_pylist()
    assert other[0] != tokens[0]


def test_the_band_of_an_age_is_kept_and_a_birth_date_is_not() -> None:
    ages = ["61", "3 d", "17.5", "061Y", "1970-03-02", "02.03.1970", "19700302", ""]
    reader = RowReader(lab(), KEY)
    kept = reader.parse(block(*({"age": age} for age in ages))).results["age"].to_pylist()
    assert kept == ["60-74", "under 1", "12-17", "60-74", "", "", "", ""]
    assert reader.covariates.not_read["age"] == 3


def test_sex_is_kept_as_a_letter() -> None:
    reader = RowReader(lab(), KEY)
    kept = reader.parse(block(*({"sex": sex} for sex in ["F", "female", "W", "m", "U", ""]))).results["sex"].to_pylist()
    assert kept == ["F", "F", "F", "M", "", ""]
    assert reader.covariates.not_read["sex"] == 1


def test_an_empty_block_gives_nothing() -> None:
    parsed = parse()
    assert (len(parsed.results), len(parsed.left_out), parsed.streams) == (0, 0, ())


cells = st.sampled_from(
    ["", " ", "NA", "GLU", "X", "138", "5.5", "<5", "HEM", "mmol/L", "mg/dL", "P", "Q", "2031-03-02", "line-2"]
)


@given(
    st.lists(
        st.fixed_dictionaries({role: st.one_of(st.just(ROW[role]), cells, st.text(max_size=5)) for role in ROW}),
        max_size=12,
    )
)
def test_any_cells_are_taken_or_left_out_once_each(rows: list[dict[str, str]]) -> None:
    rows = [{role: text.encode("utf-8", "ignore").decode() for role, text in row.items()} for row in rows]
    plain, encoded = parse(*rows), parse(*rows, encoded=True)
    lines = plain.results["line"].to_pylist() + plain.left_out["line"].to_pylist()
    assert sorted(lines) == list(range(2, 2 + len(rows)))
    assert plain.results.equals(encoded.results)
    assert left(plain) == left(encoded)
    assert sum(count for _, count in plain.streams) == len(plain.results)
