"""Numbers are written with three significant digits, the same everywhere, and never say more than is so."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.io.report import words
from pbm.records.figures import Figure, Percentile
from tests.io.report import sample

N = "\u202f"


@pytest.mark.parametrize(
    ("value", "written"),
    [
        (0, "0"),
        (-0.0, "0"),
        (9.8449, "9.84"),
        (10, "10.0"),
        (136.49, "136"),
        (999.6, f"1{N}000"),
        (12345.6, f"12{N}300"),
        (999_900, f"1.00{N}×{N}10⁶"),
        (-2.5, "−2.50"),
        (0.001234, "0.00123"),
        (0.0000123, f"1.23{N}×{N}10⁻⁵"),
        (-1.5e300, f"−1.50{N}×{N}10³⁰⁰"),
    ],
)
def test_a_number_has_three_significant_digits(value: float, written: str) -> None:
    assert words.number(value) == written


@given(st.floats(min_value=1e-3, max_value=9e5))
def test_a_written_number_is_within_half_a_digit_of_the_number(value: float) -> None:
    assert float(words.number(value).replace(N, "")) == pytest.approx(value, rel=0.0051)


@pytest.mark.parametrize(
    ("share", "written"),
    [
        (0, "0"),
        (1, "100"),
        (0.0004, "<0.1"),
        (0.99996, ">99.9"),
        (0.9312, "93.1"),
        (0.5, "50.0"),
        (-0.03, "−3.0"),
        (1.5, "150.0"),
    ],
)
def test_a_share_is_said_to_be_none_or_all_only_where_it_is(share: float, written: str) -> None:
    assert words.percent(share) == f"{written}{N}%"


@pytest.mark.parametrize(
    ("value", "written"),
    [
        (0, "0"),
        (0.0004, "<0.01"),
        (0.0123, "0.01"),
        (1.3333, "1.33"),
        (9.996, "10.0"),
        (1234.5, f"1{N}230"),
        (-0.2, "−0.20"),
    ],
)
def test_an_expected_count_has_no_more_digits_than_matter(value: float, written: str) -> None:
    assert words.expected(value) == written


def test_an_interval_of_shares_says_its_unit_once() -> None:
    assert words.share_interval(Figure(value=0.75, low=0.727, high=0.788)) == f"72.7 to 78.8{N}%"


@pytest.mark.parametrize(
    ("value", "low", "high", "written"),
    [
        (139.1, 136.5, 141.3, "139.10"),
        (2.31, 2.2, 2.42, "2.310"),
        (0.5, 0.1, 900.0, "0"),
        (1.5e9, 1e9, 2e9, f"1.50{N}×{N}10⁹"),
    ],
)
def test_a_limit_has_as_many_decimals_as_tell_the_limits_apart(
    value: float, low: float, high: float, written: str
) -> None:
    assert words.level(value, low, high) == written


def test_more_with_the_monitor_than_without_is_told() -> None:
    more = sample.both_ways(10, 12, 0.1)
    assert words.fewer(more) == words.share_fewer(more) == f"20.0{N}% more"
    assert words.fewer_interval(more) == f"18.0 to 22.0{N}%"
    less = sample.both_ways(10, 4, 0.1)
    assert words.fewer(less) == f"60.0{N}% fewer"
    assert words.share_fewer(less) == f"60.0{N}%"
    assert words.fewer_interval(less) == f"54.0 to 66.0{N}%"
    assert words.fewer(sample.both_ways(0, 0)) == words.fewer_interval(sample.both_ways(0, 0)) == words.NONE


def test_a_mean_over_what_was_never_found_is_a_lower_bound() -> None:
    found = sample.until(120, 5000)
    assert words.mean_in_words(found, 0.08).startswith("at least 1")
    assert words.mean_in_words(found, 0.0) == words.number(found.mean.value)


@pytest.mark.parametrize(
    ("count", "written"), [(28.0, "28"), (1234.0, f"1{N}234"), (28.5, "28.5"), (None, "over 7 days")]
)
def test_results_until_detection_are_whole_where_they_are(count: float | None, written: str) -> None:
    assert words.until(Percentile(value=count, low=None, high=None), 7) == written


def test_a_sentence_starts_large_and_ends_with_a_stop() -> None:
    assert words.sentence("too few results") == "Too few results."
    assert words.sentence(" Done! ") == "Done!"
    assert words.sentence("") == ""


def test_a_long_unit_is_cut_beside_an_axis() -> None:
    assert words.in_a_plot("mmol/L") == "mmol/L"
    assert len(words.in_a_plot("x" * 200)) == 24
