"""Monotone transforms of an admitted result: none, log, Box-Cox; forward for the statistic, back for people.

    log:     y = ln x                       x = e^y
    Box-Cox: y = (x^lambda - 1) / lambda    x = (lambda y + 1)^(1/lambda)

Both need x > 0; a result that is not is dropped (not a number). Scalar functions, looped by a kernel: numpy's log of an array differs from
math.log in the last bit of some values, and live must equal history.

Source: "An analysis of transformations", Journal of the Royal Statistical Society B 1964;26:211-252.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass

from pbm.methods.jit import Parameters


def same(x: float, par: Parameters) -> float:
    """No transform."""
    return x


def log(x: float, par: Parameters) -> float:
    """Natural logarithm; not a number unless x > 0."""
    return math.log(x) if x > 0 else math.nan


def exp(y: float, par: Parameters) -> float:
    """Back from the logarithm."""
    return math.exp(y)


def box_cox(x: float, par: Parameters) -> float:
    """Box-Cox with par = [lambda], lambda not 0; not a number unless x > 0."""
    return (x ** par[0] - 1.0) / par[0] if x > 0 else math.nan


def inverse_box_cox(y: float, par: Parameters) -> float:
    """Back from Box-Cox; 0 or infinity beyond its range."""
    base = par[0] * y + 1.0
    if base <= 0.0:
        return 0.0 if par[0] > 0 else math.inf
    return float(base ** (1.0 / par[0]))


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
