"""Faults: how an error condition changes a result from its onset on, in the order in which a laboratory would have seen it.

    shift      x + d
    noise      x + e,  e ~ N(0, (m^2 - 1) sa(x)^2): the analytic SD times m
    sporadic   x + d with probability q, else x
    drift      the shift grows linearly to d over g results

The fault is added to the raw value, then the value is rounded to the reported step, then censored at the method's limits. A result in the
history is already rounded, so its raw value is taken anywhere in its rounding cell; without that a shift below half a step would vanish.
A result that is already censored ("<5") stays as it was reported: its raw value is not known, and to let it appear at its limit would show
the monitor results that no fault brings out.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from pbm.methods.jit import Floats
from pbm.methods.reported_step import multiples
from pbm.methods.unreliable import ErrorModel

SCALES: dict[str, Callable[[Floats, ErrorModel], Floats]] = {
    "TEa": lambda x, error: error.tea(x),
    "SD": lambda x, error: error.sd(x),
    "unit": lambda x, error: np.ones_like(x),
    "percent": lambda x, error: x / 100,
}


@dataclass(frozen=True, slots=True)
class Fault:
    """One error condition.

    Attributes
    ----------
    kind
        "shift", "drift", "noise" or "sporadic".
    size
        Shift d in `unit`; for noise the multiple m of the analytic SD (above 1).
    unit
        "TEa" or "SD" (of each result), "unit" (the analyte's), "percent" (of the result); "" for noise.
    sign
        +1 or -1; +1 for noise.
    over
        Results until a drift has grown to d.
    share
        Probability q of a sporadic fault.
    """

    kind: Literal["shift", "drift", "noise", "sporadic"]
    size: float
    unit: str
    sign: int = 1
    over: int = 1
    share: float = 1.0

    def __str__(self) -> str:
        if self.kind == "noise":
            return f"noise x{self.size:g}"
        grown = f" over {self.over} results" if self.kind == "drift" else ""
        hit = f" in {self.share:g} of results" if self.kind == "sporadic" else ""
        return f"{self.kind} {self.sign * self.size:+g} {self.unit}{grown}{hit}"

    @property
    def multiple(self) -> float:
        """Factor on the analytic SD."""
        return self.size if self.kind == "noise" else 1.0

    @property
    def share_hit(self) -> float:
        """Share of measurements that meet the fault: q if it is sporadic, else all."""
        return self.share if self.kind == "sporadic" else 1.0

    def bias(self, x: Floats, error: ErrorModel) -> Floats:
        """Shift d(x) at full size, in the analyte's unit; 0 for noise."""
        if self.kind == "noise":
            return np.zeros_like(x)
        return self.sign * self.size * SCALES[self.unit](x, error)

    def growth(self, age: Floats) -> Floats:
        """Share of the full size that each result meets, `age` = 1 for the first affected one."""
        return np.minimum(age / self.over, 1.0) if self.kind == "drift" else np.ones_like(age)


@dataclass(frozen=True, slots=True)
class Reporting:
    """How the method reports: its step, and the limits below and above which it prints "<" or ">"."""

    step: float
    low: float = -math.inf
    high: float = math.inf

    def report(self, raw: Floats) -> tuple[Floats, Floats]:
        """Rounded and censored values and their censor codes (-1, 0, +1), both shape (n,)."""
        value = multiples(np.rint(raw / self.step), self.step)
        censor = np.where(value < self.low, -1.0, np.where(value > self.high, 1.0, 0.0))
        return np.clip(value, self.low, self.high), censor


@dataclass(frozen=True, slots=True)
class Chance:
    """The random part of a fault, drawn once for a history: place in the rounding cell, normal deviate, uniform; each (n,)."""

    cell: Floats
    normal: Floats
    uniform: Floats

    @classmethod
    def draw(cls, n: int, random: np.random.Generator) -> "Chance":
        """Draw for n results."""
        return cls(random.uniform(-0.5, 0.5, n), random.standard_normal(n), random.random(n))


def inflict(
    x: Floats,
    censor: Floats,
    fault: Fault,
    error: ErrorModel,
    reporting: Reporting,
    chance: Chance,
    growth: Floats | float = 1.0,
) -> tuple[Floats, Floats]:
    """The results as they would have been reported under a fault present throughout.

    Parameters
    ----------
    x, censor : (n,)
        Results in control, as reported.
    growth
        Share of the full size at each result (a drift's growth since its onset).

    Returns
    -------
    values, censor : (n,)
        As reported.
    """
    raw = x + chance.cell * reporting.step
    if fault.kind == "noise":
        raw = raw + math.sqrt(fault.size**2 - 1) * error.sd(x) * chance.normal
    else:
        raw = raw + growth * (chance.uniform < fault.share_hit) * fault.bias(x, error)
    value, beyond = reporting.report(raw)
    return np.where(censor == 0, value, x), np.where(censor == 0, beyond, censor)
