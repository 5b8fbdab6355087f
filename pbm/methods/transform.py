"""Monotone transforms of an admitted result: none, log, Box-Cox; forward for the statistic, back for people.

    log:     y = ln x                                                      x = e^y
    Box-Cox: y = (x^lambda - 1) / lambda = expm1(lambda ln x) / lambda     x = (lambda y + 1)^(1/lambda);   lambda = 0 is the logarithm

Both need x > 0; a result that is not, or whose transform is too large for a number, is dropped (not a number). Scalar functions, looped by
a kernel: the log of a numpy array differs from math.log in the last bit of some values, and live must equal history. What is too large is
caught before it is computed, since plain Python refuses it where a compiled loop gives infinity.

Source: "An analysis of transformations", Journal of the Royal Statistical Society B 1964;26:211-252.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass

from pbm.methods.jit import Parameters

LARGEST = 709.78  # e to this power is still a number


def same(x: float, par: Parameters) -> float:
    """No transform."""
    return x


def log(x: float, par: Parameters) -> float:
    """Natural logarithm; not a number unless x > 0."""
    return math.log(x) if x > 0 else math.nan


def exp(y: float, par: Parameters) -> float:
    """Back from the logarithm; infinite where too large for a number."""
    return math.exp(y) if y <= LARGEST else math.inf


def box_cox(x: float, par: Parameters) -> float:
    """Box-Cox with par = [lambda]; not a number unless x > 0 and the transform is a finite number.

    Examples
    --------
    >>> box_cox(4.0, [0.5]), round(box_cox(4.0, [-1.0]), 15), box_cox(4.0, [0.0]) == math.log(4.0), box_cox(-4.0, [0.5])
    (2.0, 0.75, True, nan)
    """
    if not x > 0:
        return math.nan
    if par[0] == 0:
        return math.log(x)
    power = par[0] * math.log(x)
    return math.expm1(power) / par[0] if power <= LARGEST else math.nan


def inverse_box_cox(y: float, par: Parameters) -> float:
    """Back from Box-Cox; 0 or infinite beyond its range."""
    if par[0] == 0:
        return math.exp(y) if y <= LARGEST else math.inf
    growth = par[0] * y
    if growth <= -1.0:
        return 0.0 if par[0] > 0 else math.inf
    power = math.log1p(growth) / par[0]
    return math.exp(power) if power <= LARGEST else math.inf


@dataclass(frozen=True, slots=True)
class Transform:
    """A transform's name and its two directions, `law(x, par)` with par = [lambda] (ignored by the others)."""

    name: str
    forward: Callable[[float, Parameters], float]
    back: Callable[[float, Parameters], float]


TRANSFORMS = {
    t.name: t
    for t in (Transform("none", same, same), Transform("log", log, exp), Transform("boxcox", box_cox, inverse_box_cox))
}
