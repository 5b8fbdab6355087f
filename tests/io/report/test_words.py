"""Numbers are written with three significant digits, the same everywhere, and never say more than is so."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.io.report import words
from pbm.records.appraisal import ResultsUntil

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


def test_an_expected_count_below_a_thousandth_is_said_to_be_so() -> None:
    assert words.expected(0.0004) == "<0.001"
    assert words.expected(0) == "0"
    assert words.expected(0.0123) == "0.0123"


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
    assert words.fewer(10, 12) == f"20.0{N}% more"
    assert words.fewer(10, 4) == f"60.0{N}% fewer"
    assert words.saved(10, 12) == f"−20.0{N}%"
    assert words.saved(0, 0) == words.fewer(0, 0) == words.NONE


def test_a_mean_over_what_was_never_found_is_a_lower_bound() -> None:
    found = ResultsUntil(mean=120, median=100, p95=None, never=0.08)
    assert words.mean_in_words(found) == "at least 120"
    assert words.mean_in_words(found.model_copy(update={"never": 0.0})) == "120"
    assert words.results_until(found.p95, 7) == "over 7 days"
    assert words.results_until(found.p95, 1) == "over 1 day"


def test_a_sentence_starts_large_and_ends_with_a_stop() -> None:
    assert words.sentence("too few results") == "Too few results."
    assert words.sentence(" Done! ") == "Done!"
    assert words.sentence("") == ""


def test_a_long_unit_is_cut_beside_an_axis() -> None:
    assert words.in_a_plot("mmol/L") == "mmol/L"
    assert len(words.in_a_plot("x" * 200)) == 24
