"""The analysers: raw = true + sd(true) (level + noise). The level takes a new small value at each calibration and reagent lot.

Level and noise are in units of the analytic SD. A level stays within 0.3 SD, which is under a tenth of TEa for every analyte here.
"""

from dataclasses import dataclass, fields
from datetime import date, timedelta

import numpy as np
import numpy.typing as npt

from synthetic_streams.analytes import Analyte, stream_name
from synthetic_streams.clock import HOUR, midnight
from synthetic_streams.seeds import child

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

CALIBRATION_DAYS = 7
LOT_DAYS = 42
CALIBRATION_SD = 0.10
LOT_SD = 0.15
LEVEL_BOUND = 0.3
LEVEL_SD = float(np.hypot(CALIBRATION_SD, LOT_SD))


@dataclass(frozen=True, slots=True)
class Levels:
    """The level of one stream as steps in time.

    Attributes
    ----------
    time
        int64, UTC microseconds at which each level begins.
    level
        In units of the analytic SD.
    new_lot
        bool: a reagent lot was changed, not only calibrated.
    """

    time: Ints
    level: Floats
    new_lot: npt.NDArray[np.bool_]

    def at(self, time: Ints) -> Floats:
        """Level in force at each time."""
        return self.level[self._place(time)]

    def lot_at(self, time: Ints) -> Ints:
        """Reagent lot in force at each time, counted from 1."""
        return np.asarray(np.cumsum(self.new_lot)[self._place(time)])

    def since(self, time: int) -> "Levels":
        """The steps at a time and later."""
        later = self.time >= time
        return Levels(*(getattr(self, field.name)[later] for field in fields(self)))

    def _place(self, time: Ints) -> Ints:
        return np.clip(np.searchsorted(self.time, time, side="right") - 1, 0, None)


def levels(analyte: Analyte, line: str, first_day: date, days: int, seed: int) -> Levels:
    """Calibrations about every week at 05:00 local, every sixth of them with a new reagent lot."""
    rng = child(seed, "levels", stream_name(analyte, line))
    started = int(rng.integers(LOT_DAYS))
    day = np.arange(-started, days, CALIBRATION_DAYS)
    new_lot = np.arange(len(day)) % (LOT_DAYS // CALIBRATION_DAYS) == 0
    lot = (LOT_SD * rng.standard_normal(int(new_lot.sum())))[np.cumsum(new_lot) - 1]
    level = np.clip(lot + CALIBRATION_SD * rng.standard_normal(len(day)), -LEVEL_BOUND, LEVEL_BOUND)
    time = np.array([midnight(first_day + timedelta(int(d))) + 5 * HOUR for d in day], dtype=np.int64)
    return Levels(time, level, new_lot)


def measure(analyte: Analyte, true_value: Floats, level: Floats, rng: np.random.Generator) -> Floats:
    """Raw result of each true value: before rounding, before the measuring range, without any fault."""
    return true_value + analyte.sd(true_value) * (level + rng.standard_normal(len(true_value)))
