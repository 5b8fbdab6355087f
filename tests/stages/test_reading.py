"""A reading of a live feed becomes a result, or tells the one reason why not."""

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.records.reading import Reading, SetAside
from pbm.records.result import Result
from pbm.stages.reading import Reader
from tests.live_laboratory import LAB_TOML, SODIUM_2, START, laboratory

LAB = laboratory()
GIVEN: dict[str, Any] = {
    "place": 12,
    "time": "2031-03-02T07:14:05Z",
    "analyte": "NA",
    "analyser": "line-2",
    "value": "138",
    "unit": "mmol/L",
    "specimen": "31-118233",
    "ward": "ED",
    "kind": "P",
}


def read(**changed: str) -> Result | SetAside:
    return Reader(LAB, kinds_given=True).read(Reading(**(GIVEN | changed)))


def result(**changed: str) -> Result:
    found = read(**changed)
    assert isinstance(found, Result), found
    return found


def test_sex_and_age_become_a_letter_and_a_band_and_a_birth_date_nothing() -> None:
    found = result(sex="female", age="3 m")
    assert (found.sex, found.age) == ("F", "under 1")
    found = result(sex="U", age="1964-03-02")
    assert (found.sex, found.age) == ("", "")


def test_a_reading_becomes_a_result_of_its_stream() -> None:
    found = result()
    assert (found.stream, found.value, found.censor, found.specimen, found.ward) == (
        SODIUM_2,
        138.0,
        0,
        "31-118233",
        "ED",
    )


@pytest.mark.parametrize(("text", "value", "censor"), [("<120", 120.0, -1), ("> 180", 180.0, 1), (" 1.4e2 ", 140.0, 0)])
def test_comparators_make_a_censored_result(text: str, value: float, censor: int) -> None:
    assert (result(value=text).value, result(value=text).censor) == (value, censor)


@pytest.mark.parametrize(
    ("changed", "reason", "found"),
    [
        ({"time": "", "analyte": "", "value": " "}, "blank line", ""),
        ({"analyte": "test", "value": "result"}, "repeated header line", ""),
        ({"kind": "Q"}, "not a patient result", "Q"),
        ({"kind": ""}, "not a patient result", ""),
        ({"analyte": "XYZ"}, "unknown test", "XYZ"),
        ({"analyte": "tsh", "unit": "mIU/L", "ward": "RESEARCH"}, "ward is left out", "RESEARCH"),
        ({"analyser": " "}, "no analyser given", ""),
        ({"analyser": "x" * 61}, "not the name of an analyser", ""),
        ({"value": ""}, "no value", ""),
        ({"value": "HEM"}, "not a number", "HEM"),
        ({"value": "1,234"}, "not a number", "1,234"),
        ({"value": "nan"}, "not a number", "nan"),
        ({"value": "1e999"}, "not a number", "1e999"),
        ({"unit": ""}, "no unit given", ""),
        ({"unit": "mg/dL"}, "unit is not mmol/L", "mg/dL"),
        ({"unit": "MMOL/L"}, "unit is not mmol/L", "MMOL/L"),
        ({"time": ""}, "no time", ""),
        ({"time": "yesterday"}, "not a time", "yesterday"),
        ({"time": "0001-01-01T00:00:00"}, "not a time", "0001-01-01T00:00:00"),
        ({"time": "2031-03-30T00:30:00"}, "time skipped by the clocks", "2031-03-30T00:30:00"),
        ({"value": "13.8"}, "outside the plausible range", "13.8"),
    ],
)
def test_what_is_no_result_is_set_aside_for_the_first_reason(changed: dict[str, str], reason: str, found: str) -> None:
    aside = read(**changed)
    assert isinstance(aside, SetAside)
    assert (aside.place, aside.reason, aside.found) == (12, reason, found)


def test_what_is_set_aside_names_its_stream_as_far_as_it_is_known() -> None:
    assert read(value="HEM").stream == "sodium@line-2"
    assert read(analyte="XYZ").stream == ""
    assert read(analyser="").stream == ""


def test_another_name_of_the_unit_is_the_unit() -> None:
    assert result(analyte="tsh", unit="uIU/mL").value == 138.0


def test_local_time_is_that_of_the_clocks_of_the_laboratory() -> None:
    assert result(time="2031-03-02T06:14:05").time == result(time="2031-03-02T07:14:05Z").time
    assert result(time="2031-07-02T07:14:05").time == result(time="2031-07-02T07:14:05Z").time


def test_an_hour_that_the_clocks_show_twice_is_read_as_its_first_passage() -> None:
    assert result(time="2031-10-26T00:30:00").time == result(time="2031-10-26T00:30:00+00:00").time


def test_a_feed_writes_numbers_and_times_in_its_own_way() -> None:
    reader = Reader(LAB, ",", "%d.%m.%Y %H:%M", units_given=False)
    found = reader.read(Reading(**(GIVEN | {"time": "02.03.2031 06:14", "value": "138,5", "unit": "", "kind": ""})))
    assert isinstance(found, Result)
    assert found.value == 138.5
    assert found.time == result(time="2031-03-02T07:14:00Z").time
    wrong = reader.read(Reading(**(GIVEN | {"time": "2031-03-02T06:14:00", "kind": ""})))
    assert isinstance(wrong, SetAside) and wrong.reason == "not a time"


def test_where_a_laboratory_does_not_tell_analysers_apart_they_are_pooled() -> None:
    import tomllib

    from pbm.records.laboratory import Lab

    pooled = Lab.model_validate(tomllib.loads(LAB_TOML.replace('analyser = "line"', "")))
    found = Reader(pooled).read(Reading(**(GIVEN | {"analyser": ""})))
    assert isinstance(found, Result)
    assert str(found.stream) == "sodium@pooled"


def test_a_long_text_is_not_kept_whole() -> None:
    aside = read(value="called to the ward at 07:20 and again later, " * 10)
    assert isinstance(aside, SetAside)
    assert len(aside.found) == 40


@given(st.builds(Reading, st.integers(1, 9), *[st.text(max_size=30)] * 8))
def test_no_text_makes_the_reader_fail(reading: Reading) -> None:
    assert isinstance(Reader(LAB).read(reading), Result | SetAside)


@given(
    st.one_of(
        st.datetimes().map(str),
        st.datetimes(timezones=st.timezones()).map(lambda one: one.isoformat()),
        st.text("0123456789-:T+Z. W", max_size=30),
    )
)
def test_no_time_makes_the_reader_fail(time: str) -> None:
    found = read(time=time)
    assert isinstance(found, SetAside) or found.time + START > 0


def test_a_patient_becomes_a_keyed_token_and_only_where_repeats_are_limited() -> None:
    reading = Reading(**(GIVEN | {"analyte": "tsh", "unit": "mIU/L", "patient": "123-456"}))
    tokens = []
    for key in (b"one key", b"one key", b"another"):
        found = Reader(LAB, patient_key=key).read(reading)
        assert isinstance(found, Result)
        tokens.append(found.patient)
    assert tokens[0] == tokens[1] != tokens[2]
    assert "123" not in tokens[0] and len(tokens[0]) == 16
    assert result(patient="123-456").patient == ""
