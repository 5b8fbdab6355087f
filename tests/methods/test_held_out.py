"""Alarms on held-out days: which count, and when the budget is kept."""

import numpy as np
import pytest

from pbm.methods.alarm import Limits
from pbm.methods.held_out import HeldOutAlarms, held_out_alarms
from pbm.methods.split import split_at

LIMITS = Limits(-3.0, 3.0, 0.0, 0.5)


def test_only_alarms_that_open_on_held_out_days_count() -> None:
    """One alarm opens in training and lasts into the held-out days, two open there."""
    path = np.array([0.0, 4.0, 4.0, 0.0, -4.0, 0.0, 4.0, 4.0])
    found = held_out_alarms(path, LIMITS, split_at(np.array([0, 0, 1, 1, 2, 2, 3, 3]), 1), 0.5)
    assert (found.days, found.episodes, found.allowed) == (3, 2, 1.5)


@pytest.mark.parametrize(("low", "kept"), [(1.2, True), (1.3, True), (1.4, False)])
def test_the_budget_is_kept_unless_the_interval_begins_above_what_it_allows(low: float, kept: bool) -> None:
    assert HeldOutAlarms(days=39, episodes=4, allowed=1.3, interval=(low, 9.2)).kept is kept
