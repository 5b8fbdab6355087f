"""Sharing a budget: against brute force and a general optimiser."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import linprog

from pbm.methods.fleet import TradeOff, shared

BUDGETS = np.array([1.0, 2.0, 3.0, 4.0, 5.0]) / 100


def cost(curve: TradeOff, budget: float) -> float:
    return float(np.interp(budget, curve.budget, curve.cost))


def convex(scale: float, power: float) -> TradeOff:
    return TradeOff(BUDGETS, scale * BUDGETS**-power)


def test_equal_streams_get_equal_shares() -> None:
    found = shared([convex(1, 0.5)] * 3, 0.09)
    assert [s.budget for s in found] == pytest.approx([0.03] * 3)


def test_the_stream_where_alarms_save_more_gets_more() -> None:
    dear, cheap = shared([convex(10, 0.5), convex(1, 0.5)], 0.06)
    assert dear.budget > cheap.budget >= BUDGETS[0]


@given(
    scales=st.lists(st.floats(0.1, 100), min_size=2, max_size=3),
    powers=st.lists(st.floats(0.1, 1.5), min_size=3, max_size=3),
    total=st.integers(3, 15),
)
def test_on_convex_curves_no_whole_allocation_is_better(scales: list[float], powers: list[float], total: int) -> None:
    curves = [convex(scale, power) for scale, power in zip(scales, powers, strict=False)]
    found = shared(curves, total / 100)
    ours = sum(cost(c, s.budget) for c, s in zip(curves, found, strict=True))
    assert sum(s.budget for s in found) <= total / 100 + 1e-12
    for whole in itertools.product(BUDGETS, repeat=len(curves)):
        if sum(whole) <= total / 100 + 1e-12:
            assert ours <= sum(cost(c, b) for c, b in zip(curves, whole, strict=True)) + 1e-9


def test_the_cost_is_that_of_a_linear_programme_on_the_hulls() -> None:
    """scipy's linprog spends the same budget on the same segments."""
    random = np.random.default_rng(3)
    curves = [
        convex(float(s), float(p)) for s, p in zip(random.uniform(1, 9, 6), random.uniform(0.2, 1.2, 6), strict=True)
    ]
    total = 0.17
    found = shared(curves, total)
    gains = np.concatenate([(c.cost[:-1] - c.cost[1:]) / np.diff(c.budget) for c in curves])
    widths = np.concatenate([np.diff(c.budget) for c in curves])
    best = linprog(-gains, A_ub=[np.ones_like(gains)], b_ub=[total - 6 * 0.01], bounds=[(0, w) for w in widths])
    ours = sum(c.cost[0] - cost(c, s.budget) for c, s in zip(curves, found, strict=True))
    assert ours == pytest.approx(-best.fun, rel=1e-9)


def test_a_cost_that_rises_by_chance_is_passed_over() -> None:
    bumpy = TradeOff(BUDGETS, np.array([10.0, 11.0, 6.0, 6.5, 5.0]))
    (found,) = shared([bumpy], 0.03)
    assert found.budget == pytest.approx(0.03)
    assert found.gain == pytest.approx((6.0 - 5.0) / 0.02)


def test_too_small_a_total_is_shared_in_proportion() -> None:
    found = shared([convex(1, 0.5), convex(9, 0.5)], 0.01)
    assert [s.budget for s in found] == pytest.approx([0.005, 0.005])


def test_more_than_the_curves_can_use_is_left_unspent() -> None:
    (found,) = shared([convex(1, 0.5)], 1.0)
    assert (found.budget, found.gain) == (pytest.approx(0.05), 0.0)


def test_nothing_to_share_is_refused() -> None:
    with pytest.raises(ValueError, match="above 0"):
        shared([convex(1, 0.5)], 0.0)
