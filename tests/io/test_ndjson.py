"""NDJSON: every line becomes a reading or is set aside with its reason."""

import json
import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.io.ndjson import LONGEST_LINE, alarm_text, read_line
from pbm.records.reading import Reading, SetAside
from pbm.records.result import Result
from pbm.stages.reading import Reader
from tests.live_laboratory import laboratory
from tests.stages.test_alarm_line import ALARM

LINE = (
    '{"time":"2031-03-02T07:14:05Z","analyte":"sodium","analyser":"line-2","value":"138","unit":"mmol/L",'
    '"specimen":"24-118233","ward":"ED"}'
)
READING = Reading(7, "2031-03-02T07:14:05Z", "sodium", "line-2", "138", "mmol/L", "24-118233", "ED", "")
JSON = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=6), inner, max_size=3),
    max_leaves=8,
)
FIELDS = st.dictionaries(st.sampled_from(Reading._fields[1:]), JSON)


def test_the_line_of_the_format_is_read() -> None:
    assert read_line(7, LINE.encode()) == READING
    assert read_line(7, b"\xef\xbb\xbf " + LINE.encode() + b"\r\n") == READING


@pytest.mark.parametrize(
    ("written", "value"), [("138", "138"), ("138.0", "138.0"), ("1.38e2", "1.38e2"), ("NaN", "NaN"), ("null", "")]
)
def test_a_number_stays_as_it_is_written(written: str, value: str) -> None:
    assert read_line(7, LINE.replace('"138"', written).encode()) == READING._replace(value=value)


def test_sex_and_age_are_read_where_they_are_given() -> None:
    line = LINE.replace("}", ',"sex":"F","age":67}')
    assert read_line(7, line.encode()) == READING._replace(sex="F", age="67")


def test_fields_that_are_not_given_are_empty_and_others_are_ignored() -> None:
    assert read_line(1, b'{"analyte":"sodium","patient_name":"somebody"}') == Reading(
        1, "", "sodium", "", "", "", "", "", ""
    )


@pytest.mark.parametrize(
    ("line", "reason", "found"),
    [
        (b"", "blank line", ""),
        (b" \r\n", "blank line", ""),
        (b"{", "not JSON", ""),
        (b'{"a":1} {"b":2}', "not JSON", ""),
        (b"[" * 50_000, "not JSON", ""),
        (b'{"value":' + b"9" * 5000 + b"}", None, ""),
        (b"138", "not a JSON object", ""),
        (b"[1]", "not a JSON object", ""),
        (b'{"ward":"\xff"}', "not UTF-8", ""),
        (b'{"value":[138]}', "neither text nor a number", "value"),
        (rb'{"ward":"\ud800"}', "not Unicode text", ""),
        (b'{"ward":true}', "neither text nor a number", "ward"),
        (b'{"ward":"' + b"x" * LONGEST_LINE + b'"}', "line too long", ""),
    ],
)
def test_a_line_that_is_no_reading_tells_why(line: bytes, reason: str | None, found: str) -> None:
    read = read_line(3, line)
    assert isinstance(read, Reading) if reason is None else read == SetAside(3, reason, found)


READER = Reader(laboratory())


@given(st.binary(max_size=200) | st.text(max_size=200).map(str.encode) | JSON.map(json.dumps).map(str.encode))
def test_no_bytes_make_the_feed_fail(line: bytes) -> None:
    read = read_line(1, line)
    assert isinstance(read, SetAside) or isinstance(READER.read(read), Result | SetAside)


@given(FIELDS, st.booleans())
def test_no_fields_make_the_feed_fail(fields: dict[str, object], escaped: bool) -> None:
    whole = json.loads(LINE) | fields
    line = json.dumps(whole, ensure_ascii=escaped).encode("utf-8", "surrogatepass")
    read = read_line(1, line)
    found = READER.read(read) if isinstance(read, Reading) else read
    texts = (found.specimen, found.ward) if isinstance(found, Result) else found[1:]
    assert "".join(texts).encode() is not None, "what was read can be stored"


@given(st.data())
def test_no_damage_to_a_line_makes_the_feed_fail(data: st.DataObject) -> None:
    line = bytearray(LINE.encode())
    for _ in range(data.draw(st.integers(1, 4))):
        line[data.draw(st.integers(0, len(line) - 1))] = data.draw(st.integers(0, 255))
    read = read_line(1, bytes(line))
    assert isinstance(read, SetAside) or isinstance(READER.read(read), Result | SetAside)


def test_an_alarm_is_one_line_of_json_with_times_in_utc() -> None:
    line = alarm_text(ALARM)
    told = json.loads(line)
    assert "\n" not in line
    assert told["stream"] == "sodium@line-2" and told["analyte"] == "sodium" and told["analyser"] == "line-2"
    assert told["time"] == "2031-03-02T08:41:12Z"
    assert told["onset"] == "2031-03-02T08:05:00Z" and told["results"] == 41
    assert told["last_control"] == "2031-03-02T07:00:00Z"


def test_what_has_no_bound_or_is_not_known_is_null() -> None:
    without = replace(ALARM, estimate=replace(ALARM.estimate, size_in_tea=math.inf), last_control=None)  # type: ignore[type-var]
    told = json.loads(alarm_text(without), parse_constant=pytest.fail)
    assert told["size_in_tea"] is None and told["last_control"] is None
    assert "onset" not in json.loads(alarm_text(replace(ALARM, estimate=None)))
