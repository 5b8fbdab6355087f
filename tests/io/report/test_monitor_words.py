"""A monitor's limits are told with as many decimals as they need, and an open side is said to be one."""

import pytest

from pbm.io.report import monitor_words
from tests.io.report import sample

(MONITOR,) = sample.SODIUM.monitors


@pytest.mark.parametrize(
    ("limits", "told"),
    [
        ((136.5, 141.3), "below 136.50 or above 141.30"),
        ((None, 141.3), "above 141 only"),
        ((0.0123, None), "below 0.0123 only"),
    ],
)
def test_limits_are_told_side_by_side(limits: tuple[float | None, float | None], told: str) -> None:
    assert monitor_words.limits_in_words(limits) == told


def test_alarms_stand_against_the_budget_in_words() -> None:
    told = monitor_words.alarms_in_words(sample.false_alarms(2))
    assert told == "2 in 40 days; the budget allows 1.33. A month: 1.50 (0.45 to 4.65). The budget is kept."
    assert "NOT kept" in monitor_words.alarms_in_words(sample.false_alarms(4))


@pytest.mark.parametrize(
    ("episodes", "place"),
    [(0, "fewer than predicted"), (1, "as predicted"), (4, "as predicted"), (5, "more than predicted")],
)
def test_the_count_stands_beside_what_the_training_days_predicted(episodes: int, place: str) -> None:
    given = MONITOR.model_copy(update={"predicted": (1, 4), "false_alarms": sample.false_alarms(episodes)})
    assert monitor_words.predicted_in_words(given).endswith(f"{place}.")
    assert "predicted 1 to 4" in monitor_words.predicted_in_words(given)


def test_without_a_prediction_none_is_told() -> None:
    assert monitor_words.predicted_in_words(MONITOR.model_copy(update={"predicted": None})) == ""


def test_a_transformed_scale_is_noticed() -> None:
    assert not monitor_words.is_transformed(MONITOR)
    assert monitor_words.is_transformed(MONITOR.model_copy(update={"limits": (4.9, 5.1)}))
