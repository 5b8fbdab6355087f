"""Results and times are read as laboratories write them, and nothing else is taken for one."""

import math
from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.records.as_written import read_time, read_value


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("138", (138.0, 0)),
        (" 4.1 ", (4.1, 0)),
        ("-0.5", (-0.5, 0)),
        ("−0.5", (-0.5, 0)),
        (".5", (0.5, 0)),
        ("5.", (5.0, 0)),
        ("1.2e3", (1200.0, 0)),
        ("2.0 *", (2.0, 0)),
        ("<5", (5.0, -1)),
        ("< 5.0 *", (5.0, -1)),
        ("≤0.01", (0.01, -1)),
        ("<=0.01", (0.01, -1)),
        ("> 1000", (1000.0, 1)),
        (">=500", (500.0, 1)),
        ("≥500", (500.0, 1)),
        ("＞500", (500.0, 1)),
        ("GREATER THAN 500", (500.0, 1)),
        ("less  than or equal to 3", (3.0, -1)),
        ("\u00a0<\u00a05", (5.0, -1)),
    ],
)
def test_a_result_is_read_with_its_comparator(text: str, expected: tuple[float, int]) -> None:
    assert read_value(text) == expected


@pytest.mark.parametrize(
    "text",
    [
        "",
        "HEM",
        "QNS",
        "see note",
        "___",
        "<",
        "> >5",
        "<>5",
        "==5",
        "1,234",
        "1 234",
        "5²",
        "½",
        "5 mmol/L",
        "nan",
        "inf",
        "1e999",
        "NOT 5",
        "POSITIVE 5",
        "5 H",
        "0x10",
        "٣",
        "5-6",
        "1.2.3",
        "--5",
    ],
)
def test_what_is_not_a_number_is_never_taken_for_one(text: str) -> None:
    assert read_value(text) is None


def test_a_decimal_comma_is_read_only_where_the_laboratory_writes_one() -> None:
    assert read_value("4,1", ",") == (4.1, 0)
    assert read_value("<0,01", ",") == (0.01, -1)
    assert read_value("4.1", ",") is None
    assert read_value("4,1") is None


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_every_float_is_read_to_the_last_bit(value: float) -> None:
    assert read_value(repr(value)) == (value, 0)
    assert read_value(f"<{value!r}".replace(".", ","), ",") == (value, -1)


@given(st.text())
def test_any_text_gives_a_finite_number_or_none(text: str) -> None:
    found = read_value(text)
    assert found is None or (math.isfinite(found[0]) and found[1] in (-1, 0, 1))


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2031-03-02T07:14:05Z", datetime(2031, 3, 2, 7, 14, 5, tzinfo=UTC)),
        ("2031-03-02 07:14", datetime(2031, 3, 2, 7, 14)),
        ("2031-03-02", datetime(2031, 3, 2)),
        ("20310302T071405", datetime(2031, 3, 2, 7, 14, 5)),
        ("2031-03-02 07:14:05.1234567", datetime(2031, 3, 2, 7, 14, 5, 123456)),
        ("2031-02-30", None),
        ("02.03.2031", None),
        ("9999-12-31T00:00:00", None),
        ("0001-01-01T00:00:00+23:00", None),
        ("1900-01-01", None),
        ("", None),
    ],
)
def test_a_time_is_read_as_written(text: str, expected: datetime | None) -> None:
    assert read_time(text) == expected


def test_an_offset_stays_with_the_time() -> None:
    found = read_time("2031-03-02T07:14:05+0530")
    assert found is not None
    assert found.utcoffset() == timedelta(hours=5, minutes=30)
