"""Faults with known truth: from its onset on, a fault adds an error to the raw value, before rounding and the measuring range.

shift: x + d (d in the unit, in TEa at x, in analytic SD at x, or percent of x); drift: the shift grows linearly over g results;
noise: x + N(0, (m^2 - 1) sd(x)^2), analytic SD times m; sporadic: each result is shifted by d with probability q.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from synthetic_streams.analytes import Analyte, known

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

KINDS = ("shift", "drift", "noise", "sporadic")
UNITS = ("TEa", "SD", "unit", "percent")


@dataclass(frozen=True, slots=True)
class Fault:
    """An error condition of one stream.

    Attributes
    ----------
    analyte, line
        The stream.
    onset
        UTC microseconds; it acts on every result at or after it.
    kind
        shift, drift, noise or sporadic.
    size
        Signed size of shift, drift and sporadic; for noise the factor m >= 1 on the analytic SD.
    unit
        Of the size: TEa, SD, unit, percent. Not used by noise.
    over
        drift: results until the full size is reached.
    share
        sporadic: probability that a result is shifted.

    Raises
    ------
    ValueError
        If the laboratory has no such stream, or kind, unit, or a parameter that the kind needs is not usable.
    """

    analyte: str
    line: str
    onset: int
    kind: str
    size: float
    unit: str = "TEa"
    over: int = 200
    share: float = 0.1

    def __post_init__(self) -> None:
        known(self.analyte, self.line)
        if self.kind not in KINDS or self.unit not in UNITS:
            raise ValueError(f"expected one of {KINDS} in one of {UNITS}, found {self.kind} in {self.unit}")
        if self.over < 1 or not 0 < self.share <= 1 or (self.kind == "noise" and self.size < 1):
            raise ValueError("expected over >= 1, 0 < share <= 1, and size >= 1 for noise")


def error(fault: Fault, analyte: Analyte, raw: Floats, time: Ints, clock: Ints, rng: np.random.Generator) -> Floats:
    """Error that a fault adds to each raw value.

    Parameters
    ----------
    fault, analyte
        What happens, and to what.
    raw, time
        Undisturbed values and when each is measured.
    clock
        Times of the stream's patient results in order: they count how far a drift has come.
    rng
        Used by noise and sporadic. As many numbers are drawn whatever the onset.
    """
    chance, draw = rng.random(len(raw)), rng.standard_normal(len(raw))
    added = fault.size * _one(fault.unit, analyte, raw)
    if fault.kind == "noise":
        added = np.sqrt(fault.size**2 - 1) * analyte.sd(raw) * draw
    if fault.kind == "drift":
        added = added * _progress(fault, time, clock)
    if fault.kind == "sporadic":
        added = np.where(chance < fault.share, added, 0.0)
    return np.where(time >= fault.onset, added, 0.0)


def _one(unit: str, analyte: Analyte, raw: Floats) -> Floats:
    """One unit of size at each value."""
    if unit == "TEa":
        return analyte.tea(raw)
    if unit == "SD":
        return analyte.sd(raw)
    return raw / 100 if unit == "percent" else np.ones_like(raw)


def _progress(fault: Fault, time: Ints, clock: Ints) -> Floats:
    before = np.searchsorted(clock, fault.onset, side="left")
    seen = np.searchsorted(clock, time, side="right") - before
    return np.clip(seen / fault.over, 0.0, 1.0)
