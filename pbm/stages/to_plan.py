"""How the numbers that methods chose become the words of plan.toml; the way back from stages/from_plan.py."""

import math
from typing import Any

import numpy as np

from pbm.methods.baseline import Baseline
from pbm.methods.chain import Preparation, Tracker
from pbm.methods.jit import Floats
from pbm.methods.limits import CalibratedLimits
from pbm.records.plan import Admit, BaselinePlan, ControlLimits, LimitsInterval
from pbm.stages.from_plan import planned_parameters


def chain_in_plan(preparation: Preparation, tracker: Tracker, z: Floats) -> dict[str, Any]:
    """Truncation, transform, baseline, statistic, centre and spread by the keys of a monitor; z (n,) are its in-control values."""
    baseline = preparation.baseline
    return {
        "admit": admit_in_plan(preparation),
        "transform": preparation.transform,
        "transform_lambda": preparation.transform_lambda if preparation.transform == "boxcox" else None,
        "baseline": None if baseline is None else baseline_in_plan(baseline),
        "statistic": tracker.statistic,
        **planned_parameters(tracker, float(np.nanmean(z))),
        "centre": tracker.centre,
        "spread": float(np.nanstd(z)),
    }


def admit_in_plan(preparation: Preparation) -> Admit:
    """Truncation limits; an open side is left out."""
    return Admit(
        low=_unless_open(preparation.low),
        high=_unless_open(preparation.high),
        mode="winsorize" if preparation.winsorize else "truncate",
    )


def baseline_in_plan(baseline: Baseline) -> BaselinePlan:
    """The table of effects; sexes and ages are left out where they take no part."""
    return BaselinePlan(
        wards=dict(baseline.wards),
        hours=baseline.hours,
        sexes=dict(baseline.sexes) or None,
        ages=dict(baseline.ages) or None,
    )


def limits_in_plan(found: CalibratedLimits) -> dict[str, Any]:
    """Limits and their intervals by the keys of a monitor."""
    return {
        "limits": ControlLimits(low=_unless_open(found.limits.low), high=_unless_open(found.limits.high)),
        "limits_interval": LimitsInterval(low=found.low_interval, high=found.high_interval),
    }


def _unless_open(limit: float) -> float | None:
    return limit if math.isfinite(limit) else None
