"""Transforms: there and back, the general library's values, plain Python = compiled to the last bit, no number too large for either."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.special import boxcox, inv_boxcox

from pbm.methods.jit import Floats, mapped
from pbm.methods.transform import TRANSFORMS

LAMBDAS = (-2.0, -1.0, -0.37, -0.05, 0.0, 0.05, 0.22, 0.5, 1.0, 2.0)
LAWS = [("none", 1.0), ("log", 0.0), *(("boxcox", power) for power in LAMBDAS)]
NUMBERS = st.floats(allow_nan=False)


def all_kinds_of_values(count: int) -> Floats:
    """Of every magnitude from subnormal to huge, some negative, zero, infinite or not a number, half of them like results."""
    random = np.random.default_rng(1)
    any_bits = random.integers(0, 2**64, count // 2, dtype=np.uint64).view(np.float64)
    like_results = np.exp(random.normal(2, 2, count - len(any_bits)))
    values = np.concatenate([any_bits, like_results])
    values[:8] = [0.0, -0.0, 5e-324, -5e-324, 1.7976931348623157e308, -1e308, math.inf, math.nan]
    return values


@pytest.mark.parametrize(("name", "power"), LAWS)
@pytest.mark.parametrize("direction", ["forward", "back"])
def test_plain_python_gives_the_compiled_values_to_the_last_bit(name: str, power: float, direction: str) -> None:
    law = getattr(TRANSFORMS[name], direction)
    values = all_kinds_of_values(1_000_000 if (name, power) in {("log", 0.0), ("boxcox", 0.22)} else 20_000)
    plain = np.array([law(x, (power,)) for x in values.tolist()])
    looped = mapped(law, values, (power,))
    gaps = np.isnan(plain)
    assert np.array_equal(gaps, np.isnan(looped))
    assert plain[~gaps].tobytes() == looped[~gaps].tobytes()


@pytest.mark.parametrize(("name", "power"), LAWS)
@given(x=st.floats(1e-3, 1e5))
def test_there_and_back_is_the_result_again(name: str, power: float, x: float) -> None:
    transform = TRANSFORMS[name]
    y = transform.forward(x, (power,))
    back = transform.back(y, (power,))
    # x = (lambda y + 1)^(1/lambda): a rounding error of y counts |dx/dy| = x^(1 - lambda) times
    lost = 4e-16 * (abs(y) * x ** (1 - power) + x * (1 + abs(math.log(x)))) if name == "boxcox" else 1e-14 * x
    assert back == pytest.approx(x, abs=4 * lost, rel=1e-14)


@pytest.mark.parametrize("power", LAMBDAS)
def test_box_cox_agrees_with_the_general_library(power: float) -> None:
    x = np.exp(np.random.default_rng(2).uniform(-12, 12, 20_000))
    ours = mapped(TRANSFORMS["boxcox"].forward, x, (power,))
    theirs = boxcox(x, power)
    np.testing.assert_allclose(ours, theirs, rtol=1e-14)
    back = mapped(TRANSFORMS["boxcox"].back, theirs, (power,))
    # with a negative lambda a large result lies next to the end of the range, where its last digits are lost
    np.testing.assert_allclose(back, inv_boxcox(theirs, power), rtol=1e-13 if power >= 0 else 1e-4)


@pytest.mark.parametrize("power", LAMBDAS)
def test_box_cox_is_its_definition(power: float) -> None:
    x = np.exp(np.random.default_rng(3).uniform(-3, 5, 2_000))
    defined = (x**power - 1) / power if power else np.log(x)
    np.testing.assert_allclose(mapped(TRANSFORMS["boxcox"].forward, x, (power,)), defined, rtol=1e-11, atol=1e-13)


@pytest.mark.parametrize(("name", "power"), LAWS)
@given(a=NUMBERS, b=NUMBERS)
def test_a_greater_result_never_transforms_to_less(name: str, power: float, a: float, b: float) -> None:
    low, high = (TRANSFORMS[name].forward(x, (power,)) for x in sorted((a, b)))
    assert math.isnan(low) or math.isnan(high) or low <= high
    below, above = (TRANSFORMS[name].back(y, (power,)) for y in sorted((a, b)))
    assert below <= above


@pytest.mark.parametrize(("name", "power"), LAWS[1:])
@given(x=st.floats(max_value=0.0))
def test_a_result_that_is_not_positive_is_dropped(name: str, power: float, x: float) -> None:
    assert math.isnan(TRANSFORMS[name].forward(x, (power,)))


@pytest.mark.parametrize(("name", "power"), LAWS[1:])
@given(x=st.floats(min_value=0.0, exclude_min=True, allow_infinity=False))
def test_the_transform_of_a_number_is_finite_or_dropped(name: str, power: float, x: float) -> None:
    assert not math.isinf(TRANSFORMS[name].forward(x, (power,)))


@pytest.mark.parametrize("power", [-2.0, -0.5, 0.5, 2.0])
def test_beyond_its_range_box_cox_goes_back_to_the_end_of_the_results(power: float) -> None:
    beyond = -1 / power * (1 + 1e-12)
    assert TRANSFORMS["boxcox"].back(beyond, (power,)) == (0.0 if power > 0 else math.inf)
