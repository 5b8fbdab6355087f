"""A raw value is rounded to the reported step and then held against the measuring range."""

from decimal import Decimal

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from synthetic_streams import Laboratory
from synthetic_streams.analytes import ANALYTES, BY_KEY, Analyte
from synthetic_streams.reporting import report


def naive(analyte: Analyte, raw: float) -> str:
    """Slow and obvious: decimal arithmetic on the printed limits."""
    step = Decimal(1).scaleb(-analyte.decimals)
    low, high = (Decimal(repr(limit)).quantize(step) for limit in (analyte.low, analyte.high))
    rounded = Decimal(round(raw * 10**analyte.decimals)).scaleb(-analyte.decimals).quantize(step)
    if rounded < low:
        return f"<{low}"
    return f">{high}" if rounded > high else str(rounded)


@given(st.sampled_from(ANALYTES), st.lists(st.floats(-50, 4000), min_size=1, max_size=20))
def test_reported_texts_are_those_of_decimal_arithmetic(analyte: Analyte, raw: list[float]) -> None:
    assert report(analyte, np.array(raw)).text.tolist() == [naive(analyte, value) for value in raw]


@pytest.mark.parametrize(
    ("key", "raw", "text", "value", "censor"),
    [
        ("alt", 4.4, "<5", 5.0, -1),
        ("alt", 4.6, "5", 5.0, 0),
        ("tsh", 0.0049, "<0.01", 0.01, -1),
        ("glucose", 41.64, "41.6", 41.6, 0),
        ("glucose", 41.66, ">41.6", 41.6, 1),
        ("albumin", -2.0, "<5", 5.0, -1),
    ],
)
def test_results_beyond_the_measuring_range_are_censored_after_rounding(
    key: str, raw: float, text: str, value: float, censor: int
) -> None:
    seen = report(BY_KEY[key], np.array([raw]))
    assert (seen.text[0], seen.value[0], seen.censor[0]) == (text, value, censor)


@pytest.mark.parametrize("analyte", ANALYTES, ids=lambda analyte: analyte.key)
def test_every_reported_value_lies_on_the_grid_and_its_text_reads_back(
    laboratory: Laboratory, analyte: Analyte
) -> None:
    sample = laboratory.sample(analyte, analyte.lines[0])
    assert [float(text.lstrip("<>")) for text in sample.text] == sample.value.tolist()
    assert {text.lstrip("<>")[::-1].find(".") for text in sample.text} == {analyte.decimals or -1}
    inside = sample.censor == 0
    assert np.abs(sample.value - sample.raw)[inside].max() <= analyte.step / 2 + 1e-9
