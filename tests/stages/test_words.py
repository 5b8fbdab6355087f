"""Monitors as people read them."""

import pytest

from pbm.records.plan import Admit, ControlLimits, MonitorPlan, Outside
from pbm.stages.words import monitor_in_brief, monitor_in_words

COMMON = {"centre": 1.0, "limits": ControlLimits(low=0, high=2), "budget_per_day": 0.1, "spread": 3.0}


@pytest.mark.parametrize(
    ("given", "words", "brief"),
    [
        ({"statistic": "mean", "window": 50}, "moving mean, of 50 results", "moving mean 50"),
        ({"statistic": "ewma", "weight": 0.05}, "EWMA, weight 0.05", "EWMA 0.05"),
        ({"statistic": "sd", "window": 25, "level": 140}, "moving SD, of 25 results", "moving SD 25"),
        (
            {"statistic": "ewsd", "weight": 0.1, "level": 140},
            "exponentially weighted SD, weight 0.1",
            "exponentially weighted SD 0.1",
        ),
        (
            {"statistic": "share", "window": 50, "outside": Outside(low=135, high=145), "level": 140},
            "moving share, of 50 results, below 135 or above 145",
            "moving share 50",
        ),
        (
            {"statistic": "share", "window": 50, "outside": Outside(high=6.2), "level": 5},
            "moving share, of 50 results, above 6.2",
            "moving share 50",
        ),
        ({"statistic": "cusum", "reference": 0.5, "level": 140}, "CUSUM, reference 0.5 SD", "CUSUM 0.5"),
        (
            {"statistic": "batch", "window": 20, "exponent": 0.5},
            "batch-weighted mean, batches of 20 results, exponent 0.5",
            "batch-weighted mean 20",
        ),
    ],
)
def test_every_statistic_is_told_with_its_parameters(given: dict[str, object], words: str, brief: str) -> None:
    plan = MonitorPlan.model_validate({**COMMON, **given})
    assert monitor_in_words(plan, "mmol/L") == f"{words}, all results"
    assert monitor_in_brief(plan) == brief


def test_truncation_and_transform_are_told_after_the_statistic() -> None:
    plan = MonitorPlan.model_validate(
        {**COMMON, "statistic": "median", "window": 51, "admit": Admit(low=125, high=155), "transform": "log"}
    )
    told = "moving median, of 51 results, results below 125 or above 155 mmol/L left out, on the logarithm"
    assert monitor_in_words(plan, "mmol/L") == told
    assert monitor_in_brief(plan) == "moving median 51, 125 to 155, log"
