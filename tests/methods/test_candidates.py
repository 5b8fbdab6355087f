"""Candidates: truncation limits as people write them, transforms where they make sense, windows that fit the history."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.candidates import BY_ORDER, FAMILIES, WHOLE_GRID, Candidate, candidates, preparations
from pbm.methods.chain import Preparation
from pbm.methods.jit import Floats
from pbm.methods.reported_step import multiples
from pbm.methods.seeds import child


def results(step: float, skewed: bool = True, count: int = 6000) -> Floats:
    random = child(1, "results", step, skewed)
    spread = random.gamma(4, 0.25, count) if skewed else random.normal(10, 1, count)
    return multiples(np.maximum(np.rint(30 * spread), 1), step)


def offered(x: Floats, step: float) -> list[Preparation]:
    return preparations(x, step, child(2, "lambda"))


@pytest.mark.parametrize("step", [1.0, 0.1, 0.05, 0.01, 0.2, 0.3, 5.0])
@pytest.mark.parametrize("skewed", [True, False])
def test_truncation_limits_are_reported_numbers_as_their_text_says(step: float, skewed: bool) -> None:
    """Not 5.800000000000001: a result of 5.8 would lie on the other side of it."""
    places = max(0, -math.floor(math.log10(step)))
    for preparation in offered(results(step, skewed), step):
        for limit in (preparation.low, preparation.high):
            if math.isfinite(limit):
                assert limit == float(f"{limit:.{places}f}")
                assert abs(limit / step - round(limit / step)) < 1e-6


def test_truncation_limits_hold_their_share_of_the_results_and_go_outwards_to_the_step() -> None:
    x = results(0.1)
    low, high = np.quantile(x, [0.02, 0.98])
    chosen = [p for p in offered(x, 0.1) if low - 0.1 < p.low <= low + 1e-9 and high - 1e-9 <= p.high < high + 0.1]
    assert {(p.winsorize, p.transform) for p in chosen} == {
        (w, t) for w in (False, True) for t in ("none", "log", "boxcox")
    }


def test_skewed_results_are_also_truncated_on_their_long_side_alone() -> None:
    x = results(0.1)
    for given_, sign in ((x, 1), (100 - x, -1)):
        found = [p for p in offered(given_, 0.1) if math.isinf(p.low) != math.isinf(p.high)]
        assert {p.winsorize for p in found} == {False, True}
        assert all(math.isfinite(p.high if sign > 0 else p.low) for p in found)
    assert not [p for p in offered(results(1.0, skewed=False), 1.0) if math.isinf(p.low) != math.isinf(p.high)]


def test_fences_lie_so_many_quartile_distances_outside_the_quartiles() -> None:
    """Of 0 ... 100 the quartiles are 25 and 75; the fences at 1.5 distances are -50 and 150, at 3 they are -125 and 225."""
    found = {(p.low, p.high, p.winsorize) for p in offered(np.arange(101.0), 1.0)}
    assert {(low, high, w) for low, high in ((-50.0, 150.0), (-125.0, 225.0)) for w in (False, True)} <= found


def test_a_stream_of_any_kind_has_700_choices_or_more() -> None:
    for skewed in (False, True):
        for watches, least in (("shift", 700), ("imprecision", 250)):
            of = offered(results(1.0, skewed), 1.0)
            assert len(list(candidates(of, 2_000, WHOLE_GRID.watching(watches)))) >= least


def test_a_statistic_that_goes_by_order_is_not_tried_on_a_transform() -> None:
    found = list(candidates(offered(results(0.1), 0.1), 2_000, WHOLE_GRID.shift))
    assert {c.preparation.transform for c in found if c.statistic in BY_ORDER} == {"none"}
    assert {c.preparation.transform for c in found if c.statistic not in BY_ORDER} == {"none", "log", "boxcox"}


def test_a_moving_share_counts_beyond_quantiles_of_the_values_that_it_takes() -> None:
    z = np.append(np.arange(1001.0), np.nan)
    tracker = Candidate(Preparation(), "share", 50, (("beyond", 0.05),)).centred(z)[0]
    assert tracker.named == {"window": 50, "low": 50.0, "high": 950.0}
    batch = Candidate(Preparation(), "batch", 10, (("exponent", 0.5),)).centred(z)[0]
    assert batch.named == {"window": 10, "exponent": 0.5}


def test_no_preparation_is_offered_twice_and_none_winsorizes_at_infinity() -> None:
    for x in (results(1.0), np.append(np.full(6000, 7.0), 9.0), np.tile([4.0, 5.0], 3000)):
        found = offered(x, 1.0)
        assert len(found) == len(set(found))
        assert found[0] == Preparation(), "all results as they are come first"
        assert all(p.low < p.high for p in found)
        assert not any(p.winsorize and math.isinf(p.low) and math.isinf(p.high) for p in found)


@pytest.mark.parametrize(
    ("x", "transforms"),
    [
        (results(1.0, skewed=False), {"none"}),
        (results(1.0), {"none", "log", "boxcox"}),
        (results(1.0) - 20, {"none"}),
        (np.maximum(results(1.0) - 20, 0), {"none"}),
        (np.full(6000, 5.0), {"none"}),
        (np.exp(child(3, "log").normal(0, 0.6, 6000)), {"none", "log"}),
    ],
    ids=["symmetric", "skewed", "negative", "zero", "constant", "lognormal"],
)
def test_a_transform_is_offered_only_for_positive_skewed_results(x: Floats, transforms: set[str]) -> None:
    assert {p.transform for p in offered(x, 1.0)} == transforms


def test_one_rare_value_among_constant_results_is_no_traceback() -> None:
    """The sample from which lambda is learned may miss the rare one."""
    x = np.append(np.full(60_000, 5.0), 50.0)
    for seed in range(5):
        assert preparations(x, 1.0, np.random.default_rng(seed))[0] == Preparation()


def test_lambda_is_the_one_that_makes_the_results_normal() -> None:
    x = (1 + 0.4 * child(4, "root").normal(2, 0.9, 20_000).clip(-1, 5)) ** (1 / 0.4)
    (power,) = {p.transform_lambda for p in offered(x, 0.001) if p.transform == "boxcox"}
    assert power == pytest.approx(0.4, abs=0.1)


@given(st.integers(1, 400))
def test_no_window_is_longer_than_allowed(longest: int) -> None:
    def remembered(statistic: str, parameter: float) -> float:
        return {"ewma": 2 / parameter, "cusum": 1}.get(statistic, parameter)

    offered_ = {(c.statistic, c.parameter) for c in candidates([Preparation()], longest, WHOLE_GRID.shift)}
    for family in WHOLE_GRID.shift:
        for parameter in family.parameters:
            fits = remembered(family.statistic, parameter) <= longest
            assert ((family.statistic, parameter) in offered_) == fits


def test_the_simplest_candidate_has_no_baseline_no_transform_and_no_truncation() -> None:
    plain = Candidate(Preparation(), "ewma", 0.1)
    less_simple = [
        Candidate(Preparation(), "mean", 10),
        Candidate(Preparation(low=1.0, high=9.0), "ewma", 0.1),
        Candidate(Preparation(low=1.0, high=9.0, winsorize=True), "ewma", 0.1),
        Candidate(Preparation(transform="log"), "ewma", 0.1),
    ]
    assert all(plain.complexity < other.complexity for other in less_simple)
    assert less_simple[1].complexity < less_simple[2].complexity < less_simple[3].complexity < less_simple[0].complexity


def test_the_order_of_simplicity_begins_with_what_is_easiest_to_explain() -> None:
    assert FAMILIES[:3] == ("ewma", "mean", "median")
