"""Sex and age as they are written: the forms that laboratories use, the edges of the bands, and nothing that is a date."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.records.sex_and_age import AGE_BANDS, OLDEST, age_band, read_age_band, read_sex


@pytest.mark.parametrize(
    ("written", "sex"),
    [
        *((text, "F") for text in ("F", "f", "female", "Female", "W", " woman ", "2")),
        *((text, "M") for text in ("M", "m", "male", "MALE", "man", "1")),
        *((text, "") for text in ("", "U", "unknown", "O", "X", "0", "9", "12", "female/male")),
    ],
)
def test_sex_is_read_as_laboratories_write_it(written: str, sex: str) -> None:
    assert read_sex(written) == sex


@pytest.mark.parametrize(
    ("written", "band"),
    [
        ("0", "under 1"),
        ("3 m", "under 1"),
        ("3m", "under 1"),
        ("11 months", "under 1"),
        ("12 mo", "1-11"),
        ("18 M", "1-11"),
        ("364 d", "under 1"),
        ("51 wk", "under 1"),
        ("20 h", "under 1"),
        ("0.5", "under 1"),
        ("0,5 y", "under 1"),
        ("11.9", "1-11"),
        ("12", "12-17"),
        ("067Y", "60-74"),
        ("67", "60-74"),
        ("67 y", "60-74"),
        ("67 a", "60-74"),
        ("75 years", "75 and over"),
        (" 101 ", "75 and over"),
    ],
)
def test_an_age_falls_into_its_band(written: str, band: str) -> None:
    assert read_age_band(written) == band


@pytest.mark.parametrize(
    "written",
    ["", "1964-03-02", "02.03.1964", "19640302", "1964", "640302", "03/64", "999", "131", "-4", "67 x", "y", "adult"],
)
def test_what_is_no_age_has_no_band(written: str) -> None:
    assert read_age_band(written) == ""


@pytest.mark.parametrize("band", AGE_BANDS)
def test_a_band_is_read_as_itself(band: str) -> None:
    assert read_age_band(band) == band


def test_every_whole_year_has_the_band_that_its_name_says() -> None:
    named = {"under 1": range(1), "1-11": range(1, 12), "12-17": range(12, 18), "18-39": range(18, 40)}
    named |= {"40-59": range(40, 60), "60-74": range(60, 75), "75 and over": range(75, OLDEST + 1)}
    assert {band: [y for y in range(OLDEST + 1) if age_band(y) == band] for band in AGE_BANDS} == {
        band: list(years) for band, years in named.items()
    }


@given(st.text(max_size=12))
def test_whatever_is_written_only_a_letter_and_a_band_come_out(text: str) -> None:
    assert read_sex(text) in ("", "F", "M")
    assert read_age_band(text) in ("", *AGE_BANDS)
