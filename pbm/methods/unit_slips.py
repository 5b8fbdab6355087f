"""Unit slips: a step of the daily median by a factor that converts one unit into another.

Each day's median is compared with the median of the last days before it. A slip is told where their ratio lies near the factor of a
conversion, and where that factor lies far outside of how the ratio varies otherwise. From then on the new level is the level to compare
with, so that a slip back is told as well.

The factors are those of the molar masses and of the decimal prefixes.
"""

import math
from dataclasses import dataclass

import numpy as np

from pbm.methods.jit import Floats

CONVERSIONS = {
    10.0: "a factor of ten, such as g/dL and g/L",
    100.0: "a factor of a hundred, such as % and a fraction",
    1000.0: "a factor of a thousand, such as mmol/L and umol/L",
    18.016: "mg/dL and mmol/L of glucose",
    88.42: "mg/dL and umol/L of creatinine",
    2.801: "mg/dL of urea nitrogen and mmol/L of urea",
    6.006: "mg/dL and mmol/L of urea",
    38.67: "mg/dL and mmol/L of cholesterol",
    88.57: "mg/dL and mmol/L of triglycerides",
    17.10: "mg/dL and umol/L of bilirubin",
    4.008: "mg/dL and mmol/L of calcium",
    2.431: "mg/dL and mmol/L of magnesium",
    3.097: "mg/dL and mmol/L of phosphate",
    59.48: "mg/dL and umol/L of urate",
    5.585: "ug/dL and umol/L of iron",
    1.6114: "g/dL and mmol/L of haemoglobin",
}
LEVEL_DAYS = 7
FEWEST_DAYS = 3
NEAR = 0.06  # of the logarithm of the ratio
WITHIN, FAR_OUTSIDE = 3.0, 5.0  # SD of the usual day-to-day change
SAME_LEVEL = 0.25  # of the logarithm


@dataclass(frozen=True, slots=True)
class UnitSlip:
    """A step at day `day` (index of the medians) from level `before` to `after`; `factor` is the conversion it lies near."""

    day: int
    before: float
    after: float
    factor: float


def find_unit_slips(medians: Floats) -> list[UnitSlip]:
    """The slips among daily medians (d,), not a number on days with too few results."""
    usual = _usual_change(medians)
    slips: list[UnitSlip] = []
    level: list[float] = []
    for day, median in enumerate(medians.tolist()):
        if math.isnan(median) or median <= 0:
            continue
        if len(level) >= FEWEST_DAYS or (slips and level):
            before = float(np.median(level[-LEVEL_DAYS:]))
            if _is_conversion(math.log(median / before), usual):
                after = _level_from(medians, day)
                slips.append(UnitSlip(day, before, after, _nearest(math.log(after / before))))
                level = []
        level.append(median)
    return slips


def _usual_change(medians: Floats) -> float:
    """SD of the logarithm of the change from day to day, from what nine in ten stay within: a few slips do not move it."""
    logs = np.log(medians[medians > 0])
    if len(logs) < FEWEST_DAYS + 1:
        return math.inf
    return float(np.quantile(np.abs(np.diff(logs)), 0.9)) / 1.645


def _is_conversion(log_ratio: float, usual: float) -> bool:
    known = _nearest(log_ratio)
    off = abs(abs(log_ratio) - math.log(known))
    return off < max(NEAR, WITHIN * usual) and math.log(known) > FAR_OUTSIDE * usual


def _nearest(log_ratio: float) -> float:
    return min(CONVERSIONS, key=lambda factor: abs(abs(log_ratio) - math.log(factor)))


def _level_from(medians: Floats, day: int) -> float:
    """The level from a day on: the median of the next days that stay near it."""
    following = medians[day : day + LEVEL_DAYS]
    following = following[following > 0]
    return float(np.median(following[np.abs(np.log(following / medians[day])) < SAME_LEVEL]))
