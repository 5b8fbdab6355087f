"""Times become UTC; the laboratory's clock is put forward and back twice a year."""

from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.errors import InputError
from pbm.stages.intake.times import NOT_A_TIME, READ, SKIPPED, WallClock

PARIS = ZoneInfo("Europe/Paris")


def read(
    texts: list[str], clock: WallClock | None = None, first: int = 2, time_format: str | None = None
) -> list[str | int]:
    """UTC to the minute, or the fault."""
    clock = clock or WallClock(PARIS)
    micros, faults = clock.to_utc(pa.array(texts, pa.string()), np.arange(first, first + len(texts)), time_format)
    told = np.datetime_as_string(micros.view("datetime64[us]"), "m").tolist()
    return [text if fault == READ else int(fault) for text, fault in zip(told, faults, strict=True)]


def test_a_time_with_offset_is_absolute_and_one_without_is_the_laboratorys() -> None:
    assert read(["2024-07-01T12:00:00Z", "2024-07-01T12:00:00+05:30", "2024-07-01T12:00:00", "2024-01-01 12:00"]) == [
        "2024-07-01T12:00",
        "2024-07-01T06:30",
        "2024-07-01T10:00",
        "2024-01-01T11:00",
    ]


def test_what_is_no_time_does_not_disturb_its_neighbours() -> None:
    for good in ("2024-07-01T12:00:00", "2024-07-01T10:00:00Z"):
        assert read(["2024-02-30T12:00:00", good, "soon", "9999-12-31T00:00:00", good]) == [
            NOT_A_TIME,
            "2024-07-01T10:00",
            NOT_A_TIME,
            NOT_A_TIME,
            "2024-07-01T10:00",
        ]


def test_an_hour_that_the_clocks_skip_does_not_exist() -> None:
    assert read(["2024-03-31 01:59", "2024-03-31 02:00", "2024-03-31 02:59", "2024-03-31 03:00"]) == [
        "2024-03-31T00:59",
        SKIPPED,
        SKIPPED,
        "2024-03-31T01:00",
    ]


def test_in_an_hour_that_the_clocks_repeat_the_step_back_tells_the_passages_apart() -> None:
    clock = WallClock(PARIS)
    written = ["01:50", "02:10", "02:05", "02:50", "02:01", "02:20", "02:15", "02:59", "03:00"]
    assert read([f"2024-10-27 {one}" for one in written], clock) == [
        "2024-10-26T23:50",
        "2024-10-27T00:10",
        "2024-10-27T00:05",  # a line out of order is no step of the clock
        "2024-10-27T00:50",
        "2024-10-27T01:01",
        "2024-10-27T01:20",
        "2024-10-27T01:15",
        "2024-10-27T01:59",
        "2024-10-27T02:00",
    ]
    assert clock.by_sequence == 7


@pytest.mark.parametrize("cut", range(1, 8))
def test_the_end_of_a_block_does_not_hide_the_step_back(cut: int) -> None:
    written = [f"2024-10-27 {one}" for one in ("01:50", "02:10", "02:50", "02:01", "02:20", "02:59", "03:00", "03:01")]
    clock = WallClock(PARIS)
    parts = read(written[:cut], clock) + read(written[cut:], clock, first=2 + cut)
    assert parts == read(written)


def test_another_year_and_another_part_of_the_file_start_afresh() -> None:
    clock = WallClock(PARIS)
    read(["2023-10-29 02:50", "2023-10-29 02:01"], clock)
    assert read(["2024-10-27 02:10"], clock, first=4) == ["2024-10-27T00:10"]
    read(["2024-10-27 02:01"], clock, first=5)
    assert read(["2024-10-27 02:10"], clock, first=5000) == ["2024-10-27T00:10"]


def test_a_pattern_replaces_iso() -> None:
    pattern = "%d.%m.%Y %H:%M"
    assert read(["01.07.2024 12:00", "2024-07-01 12:00", "31.03.2024 02:30"], time_format=pattern) == [
        "2024-07-01T10:00",
        NOT_A_TIME,
        SKIPPED,
    ]
    assert read(["01.07.2024 12:00 +0200", "x"], time_format=f"{pattern} %z") == ["2024-07-01T10:00", NOT_A_TIME]


def test_a_pattern_that_is_none_is_told() -> None:
    with pytest.raises(InputError, match=r'extract.time_format: "%Q" is not a pattern'):
        read(["x"], time_format="%Q")


moments = st.datetimes(datetime(1990, 1, 1), datetime(2090, 1, 1))


@given(st.lists(st.tuples(moments, st.sampled_from(["iso", "Z", "+02:00", " ", "basic"])), max_size=20))
def test_any_mixture_of_forms_equals_reading_one_by_one(written: list[tuple[datetime, str]]) -> None:
    texts, expected = [], []
    for moment, form in written:
        text = {"iso": moment.isoformat(), " ": moment.isoformat(" "), "basic": f"{moment:%Y%m%dT%H%M%S.%f}"}
        texts.append(text.get(form, moment.isoformat() + form))
        offsets = {"Z": timedelta(), "+02:00": timedelta(hours=2)}
        exact = moment - offsets[form] if form in offsets else None
        local = moment.replace(tzinfo=PARIS)
        exists = local.astimezone(UTC).astimezone(PARIS).replace(tzinfo=None) == moment
        sides = {local.replace(fold=fold).astimezone(UTC).replace(tzinfo=None) for fold in (0, 1)}
        expected.append({exact} if exact is not None else sides if exists else set())
    micros, faults = WallClock(PARIS).to_utc(pa.array(texts, pa.string()), np.arange(len(texts)), None)
    for found, fault, allowed in zip(micros.tolist(), faults.tolist(), expected, strict=True):
        assert (fault == SKIPPED) if not allowed else datetime(1970, 1, 1) + timedelta(microseconds=found) in allowed


@given(st.lists(st.text(max_size=30), max_size=10))
def test_any_text_is_a_time_or_not(texts: list[str]) -> None:
    assert len(read([text for text in texts if text.isprintable()])) == sum(text.isprintable() for text in texts)
