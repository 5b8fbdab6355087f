"""From the words of lab.toml and plan.toml to the numbers that methods work with."""

import math
from typing import Any

import pytest
from pydantic import ValidationError

from pbm.methods.alarm import Limits
from pbm.methods.baseline import Baseline, Effects
from pbm.methods.chain import Preparation
from pbm.methods.faults import Fault, Reporting
from pbm.methods.onset import InControl
from pbm.methods.unreliable import ErrorModel
from pbm.records.laboratory import Controls, FaultList
from pbm.records.plan import MonitorPlan
from pbm.stages.from_plan import error_model, faults_of, in_control, limits, preparation, reporting
from pbm.stages.to_plan import baseline_in_plan
from tests.stages.offline import laboratory


def analyte(**given: Any) -> Any:
    return laboratory(**given).analytes["sodium"]


def monitor(**given: Any) -> MonitorPlan:
    usual = {
        "statistic": "ewma", "weight": 0.1, "centre": 139.0, "limits": {"low": 136.0, "high": 142.0},
        "budget_per_day": 0.1, "spread": 3.0,
    }  # fmt: skip
    return MonitorPlan(**(usual | given))


def test_every_size_is_guarded_against_on_the_sides_that_are_named_with_its_weight() -> None:
    given = [
        {"kind": "shift", "sizes": [0.5, 1], "unit": "TEa"},
        {"kind": "drift", "sizes": [2], "unit": "SD", "signs": "down", "over": "80 results", "weight": 3},
        {"kind": "sporadic", "sizes": [3], "unit": "percent", "signs": "up", "share": 0.2},
        {"kind": "noise", "sizes": [2], "weight": 0.5},
    ]
    assert faults_of(analyte(faults=given)) == [
        (Fault("shift", 0.5, "TEa", -1), 1.0),
        (Fault("shift", 0.5, "TEa", 1), 1.0),
        (Fault("shift", 1.0, "TEa", -1), 1.0),
        (Fault("shift", 1.0, "TEa", 1), 1.0),
        (Fault("drift", 2.0, "SD", -1, over=80), 3.0),
        (Fault("sporadic", 3.0, "percent", 1, share=0.2), 1.0),
        (Fault("noise", 2.0, ""), 0.5),
    ]


@pytest.mark.parametrize("sizes", [[0.5], [1.0], [2.0, 0.9]])
def test_noise_that_would_lower_the_imprecision_is_refused(sizes: list[float]) -> None:
    with pytest.raises(ValidationError, match="above 1 for noise"):
        FaultList(kind="noise", sizes=tuple(sizes))


@pytest.mark.parametrize("every", [0, -5, True, 2.5, "0 results", "a few results"])
def test_controls_after_no_result_at_all_are_refused(every: object) -> None:
    with pytest.raises(ValidationError, match="expected a count of results"):
        Controls(every=every)  # type: ignore[arg-type]


def test_a_limit_that_is_not_given_is_none() -> None:
    assert error_model(analyte(allowable_error={"percent": 8}, analytic_sd={"cv_percent": 2})) == ErrorModel(
        0.0, 8, 0.0, 2
    )
    assert reporting(analyte(step=0.1, reportable={"low": 5})) == Reporting(0.1, 5.0, math.inf)
    assert preparation(monitor(admit={"high": 150})) == Preparation(-math.inf, 150.0)


def test_a_monitor_is_prepared_and_limited_as_its_plan_says() -> None:
    given = monitor(
        admit={"low": 125, "high": 155, "mode": "winsorize"}, transform="boxcox", transform_lambda=0.3, rearm=0.4, level=138.0,
        slope=0.8, inflation=1.5, wander=0.2,
    )  # fmt: skip
    assert preparation(given) == Preparation(125.0, 155.0, True, "boxcox", 0.3)
    assert limits(given) == Limits(136.0, 142.0, 139.0, 0.4)
    assert in_control(given) == InControl(138.0, 3.0, 1.5, 0.8, 0.2)
    assert in_control(monitor()).centre == 139.0


@pytest.mark.parametrize("people", [((), ()), ((("", 0.1), ("F", -0.2)), (("60-74", 0.3),))])
def test_a_baseline_comes_back_from_its_plan(people: tuple[Effects, Effects]) -> None:
    baseline = Baseline((("ED", 0.5), ("", -0.1)), (0.25,) * 168, *people)
    assert preparation(monitor(baseline=baseline_in_plan(baseline))).baseline == baseline


def test_a_limit_that_is_left_out_never_alarms() -> None:
    assert limits(monitor(limits={"high": 142.0})) == Limits(-math.inf, 142.0, 139.0, 0.5)
    assert limits(monitor(limits={"low": 136.0})) == Limits(136.0, math.inf, 139.0, 0.5)
