"""Control materials: two levels of every analyte at 06:00, 14:00 and 22:00, judged by 1-3s, 2-2s and R-4s within the event.

A rejected event is repeated once, 20 minutes later. 2-2s: both levels beyond 2 SD on one side; R-4s: range over 4 SD.
"""

from collections.abc import Sequence
from dataclasses import dataclass, fields
from datetime import datetime, time, timedelta
from typing import Any

import numpy as np
import numpy.typing as npt

from synthetic_streams.analysers import LEVEL_SD, measure
from synthetic_streams.analytes import Analyte, stream_name
from synthetic_streams.clock import SECOND, utc
from synthetic_streams.faults import Fault
from synthetic_streams.laboratory import Laboratory, StreamSample
from synthetic_streams.seeds import child

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]
Flags = npt.NDArray[np.bool_]

TIMES = ("06:00", "14:00", "22:00")
RULES = ("1-3s", "2-2s", "R-4s")
LEVELS = 2
BETWEEN_LEVELS = 60 * SECOND
REPEAT_AFTER = 20 * 60 * SECOND


@dataclass(frozen=True, slots=True)
class ControlResults:
    """Control results of one stream in order of time; one array element a measurement.

    Attributes
    ----------
    time
        int64, UTC microseconds.
    level
        1 or 2.
    value, text
        Reported with one decimal more than patient results.
    accepted
        bool: the event that the measurement belongs to was accepted.
    """

    time: Ints
    level: Ints
    value: Floats
    text: npt.NDArray[np.object_]
    accepted: Flags

    def rows(self, chosen: Any) -> "ControlResults":
        """The same stream with a subset of its rows (slice, mask or index)."""
        return ControlResults(*(getattr(self, field.name)[chosen] for field in fields(self)))


def control_sd(analyte: Analyte, mean: float) -> float:
    """Long-term SD of a control material: analytic SD with the steps of calibrations and lots; three significant digits."""
    sd = float(analyte.sd(np.array([mean]))[0]) * float(np.hypot(1, LEVEL_SD))
    return float(f"{sd:.3g}")


def events(laboratory: Laboratory) -> Ints:
    """UTC microseconds of every control event."""
    days = [laboratory.first_day + timedelta(day) for day in range(laboratory.days)]
    clock = [time.fromisoformat(at) for at in TIMES]
    return np.array([utc(datetime.combine(day, at)) for day in days for at in clock], dtype=np.int64)


def accepted(z: Floats) -> Flags:
    """Whether each event passes the rules; z of shape (events, levels)."""
    high, low = z.max(axis=1), z.min(axis=1)
    return np.asarray((np.abs(z).max(axis=1) <= 3) & (low <= 2) & (high >= -2) & (high - low <= 4), dtype=np.bool_)


def measure_controls(laboratory: Laboratory, sample: StreamSample, faults: Sequence[Fault]) -> ControlResults:
    """Control results of a stream over all its days.

    Parameters
    ----------
    laboratory, sample
        The laboratory and the stream's patient results, whose times count how far a drift has come.
    faults
        They act on control materials as on patient specimens.
    """
    analyte = sample.analyte
    at = events(laboratory)
    first = at[:, None] + BETWEEN_LEVELS * np.arange(LEVELS)
    time = np.stack([first, first + REPEAT_AFTER])
    value = _measured(laboratory, sample, faults, time)
    mean = np.array(analyte.levels)
    sd = np.array([control_sd(analyte, level) for level in analyte.levels])
    passed = np.stack([accepted((run - mean) / sd) for run in value])
    made = np.stack([np.ones(len(at), dtype=np.bool_), ~passed[0]])
    kept = np.repeat(made[:, :, None], LEVELS, axis=2)
    level = np.broadcast_to(np.arange(1, LEVELS + 1), kept.shape)
    verdict = np.broadcast_to(passed[:, :, None], kept.shape)
    order = np.argsort(time[kept], kind="stable")
    numbers = value[kept][order]
    text = np.array([f"{number:.{analyte.decimals + 1}f}" for number in numbers.tolist()], dtype=object)
    return ControlResults(time[kept][order], level[kept][order], numbers, text, verdict[kept][order])


def _measured(laboratory: Laboratory, sample: StreamSample, faults: Sequence[Fault], time: Ints) -> Floats:
    analyte, line = sample.analyte, sample.line
    rng = child(laboratory.seed, "controls", stream_name(analyte, line))
    mean = np.broadcast_to(np.array(analyte.levels, dtype=np.float64), time.shape).ravel()
    flat = time.ravel()
    raw = measure(analyte, mean, laboratory.levels(analyte, line).at(flat), rng)
    raw = raw + laboratory.fault_error(analyte, line, raw, flat, sample.time, faults, "controls")
    return np.round(raw, analyte.decimals + 1).reshape(time.shape)
