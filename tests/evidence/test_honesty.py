"""Limits on days that taught them nothing: the budget is kept on average, and the plan's predicted interval holds what it says."""

import pytest

from tests.evidence.honesty import AS_IN_A_PLAN, CANDIDATES, Fixed, History, held

SHORT = History(60, 60, 100, 60)


@pytest.mark.parametrize("candidate", CANDIDATES, ids=lambda one: one.statistic)
def test_later_alarms_lie_inside_the_predicted_interval_in_about_nine_of_ten_streams(candidate: Fixed) -> None:
    """A short history of two alarms; the interval is of whole numbers, so that it mostly holds more than it says."""
    assert 0.85 <= held(candidate, "normal", SHORT).share_inside <= 0.99


@pytest.mark.slow
@pytest.mark.parametrize(
    "candidate",
    [
        pytest.param(one, id=one.statistic, marks=[] if one.statistic == "ewma" else [pytest.mark.full])
        for one in CANDIDATES
    ],
)
def test_as_long_as_a_plan_later_alarms_keep_to_the_budget_and_to_what_was_predicted(candidate: Fixed) -> None:
    found = held(candidate, "normal", AS_IN_A_PLAN)
    assert 0.7 <= found.rate <= 1.25
    assert 0.85 <= found.share_inside <= 0.99
