"""Truncation limits: every mix of censoring, limits and mode against the definition; plain Python = compiled."""

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.admit import admit
from pbm.methods.chain import Preparation
from pbm.methods.jit import mapped_pairs
from tests import naive

PRINTED = (-3.0, 0.0, 2.0, 5.0, 7.0, 9.0)
LIMITS = [(a, b) for a in (-math.inf, 0.0, 2.0, 5.0) for b in (2.0, 5.0, 7.0, math.inf) if a < b]
PLACES = [quarter / 4 for quarter in range(-80, 81)]


def same(a: float, b: float) -> bool:
    return a == b or (math.isnan(a) and math.isnan(b))


@pytest.mark.parametrize("censor", [-1, 0, 1])
@pytest.mark.parametrize("winsorize", [False, True])
def test_every_result_counts_as_the_values_it_may_stand_for(censor: int, winsorize: bool) -> None:
    for x, (low, high) in itertools.product(PRINTED, LIMITS):
        ours = admit(x, float(censor), (low, high, float(winsorize)))
        assert same(ours, naive.admitted(x, censor, low, high, winsorize, PLACES)), (x, low, high)


@pytest.mark.parametrize("winsorize", [False, True])
@pytest.mark.parametrize("x", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("censor", [-1, 0, 1])
def test_what_is_not_a_finite_number_is_dropped(x: float, censor: int, winsorize: bool) -> None:
    for low, high in LIMITS:
        assert math.isnan(admit(x, float(censor), (low, high, float(winsorize))))


ANY = st.floats(allow_nan=True, allow_infinity=True)
PAIR = st.tuples(st.floats(allow_nan=False), st.floats(allow_nan=False)).map(sorted).filter(lambda p: p[0] < p[1])


@given(ANY, st.sampled_from([-1.0, 0.0, 1.0]), PAIR, st.booleans())
def test_what_is_admitted_lies_within_the_limits(x: float, censor: float, pair: list[float], winsorize: bool) -> None:
    counted = admit(x, censor, (*pair, float(winsorize)))
    assert math.isnan(counted) or pair[0] <= counted <= pair[1]


@given(ANY, st.sampled_from([-1.0, 0.0, 1.0]), PAIR, st.booleans())
def test_turning_the_axis_over_turns_the_result_over(
    x: float, censor: float, pair: list[float], winsorize: bool
) -> None:
    """So that "<" is treated as ">" is."""
    up = admit(x, censor, (*pair, float(winsorize)))
    down = admit(-x, -censor, (-pair[1], -pair[0], float(winsorize)))
    assert same(up, -down)


@given(st.floats(allow_nan=False, allow_infinity=False), st.sampled_from([-1.0, 0.0, 1.0]), st.booleans())
def test_without_limits_every_result_counts_as_printed(x: float, censor: float, winsorize: bool) -> None:
    assert admit(x, censor, (-math.inf, math.inf, float(winsorize))) == x


@given(st.floats(allow_nan=False, allow_infinity=False), PAIR)
def test_winsorizing_drops_no_result_whose_place_is_known(x: float, pair: list[float]) -> None:
    assert admit(x, 0.0, (*pair, 1.0)) == np.clip(x, *pair)


@pytest.mark.parametrize("winsorize", [False, True])
def test_plain_python_gives_the_compiled_values_to_the_last_bit(winsorize: bool) -> None:
    random = np.random.default_rng(3)
    x = np.concatenate(
        [random.normal(5, 3, 50_000), random.integers(0, 2**64, 50_000, dtype=np.uint64).view(np.float64)]
    )
    x[:4] = [0.0, -0.0, 2.0, 7.0]
    censor = random.integers(-1, 2, len(x)).astype(float)
    for par in ((2.0, 7.0, float(winsorize)), (-math.inf, 7.0, float(winsorize)), (0.0, math.inf, float(winsorize))):
        plain = np.array([admit(a, c, par) for a, c in zip(x.tolist(), censor.tolist(), strict=True)])
        looped = mapped_pairs(admit, x, censor, par)
        gaps = np.isnan(plain)
        assert np.array_equal(gaps, np.isnan(looped))
        assert plain[~gaps].tobytes() == looped[~gaps].tobytes()


@given(
    st.lists(st.tuples(st.floats(-10, 500), st.sampled_from([-1, 0, 1])), min_size=1, max_size=30),
    st.sampled_from([(0.0, 400.0), (-math.inf, 300.0), (-math.inf, math.inf)]),
    st.booleans(),
    st.sampled_from([("none", 1.0), ("log", 0.0), ("boxcox", 0.3), ("boxcox", -0.5)]),
)
def test_one_result_at_a_time_is_prepared_as_a_history_is(
    results: list[tuple[float, int]], limits: tuple[float, float], winsorize: bool, law: tuple[str, float]
) -> None:
    preparation = Preparation(*limits, winsorize, *law)
    x, censor = (np.array(column, dtype=float) for column in zip(*results, strict=True))
    whole = preparation.all(x, censor)
    single = np.array([preparation.one(value, mark) for value, mark in results])
    assert np.array_equal(whole, single, equal_nan=True)
