"""Textbook limits of an EWMA: how many of its SDs for a wanted average run length, if values were independent and normal.

With s_t = (1 - w) s_(t-1) + w x_t on standard normal values and limits +-h, h = L sqrt(w / (2 - w)), the average run length from s solves

    ARL(s) = 1 + (1 / w) integral_-h^h ARL(y) phi((y - (1 - w) s) / w) dy

here by Gauss-Legendre quadrature. Results of patients are neither independent nor normal, which is why the tool calibrates its limits on
the history instead; these stand beside them for comparison.

Source: "A simple method for studying run-length distributions of exponentially weighted moving average charts", Technometrics
1987;29:401-407.
"""

import math
from functools import cache

import numpy as np
from scipy.optimize import brentq

from pbm.methods.jit import Floats

NODES = 161  # odd: the middle one is the start at the centre
NARROWEST, WIDEST = 0.5, 5.0
SMALLEST_WEIGHT = 0.01  # below it the quadrature is too coarse


@cache
def _quadrature() -> tuple[Floats, Floats]:
    node, share = np.polynomial.legendre.leggauss(NODES)
    return node, share


def ewma_run_length(weight: float, factor: float) -> float:
    """Average run length in control, from the centre, with limits at `factor` SD of the statistic.

    Examples
    --------
    >>> round(ewma_run_length(0.1, 2.814), 1)
    499.6
    """
    h = factor * math.sqrt(weight / (2 - weight))
    node, share = _quadrature()
    y, step = h * node, h * share
    density = np.exp(-0.5 * ((y[None, :] - (1 - weight) * y[:, None]) / weight) ** 2) / math.sqrt(2 * math.pi)
    lengths = np.linalg.solve(np.eye(NODES) - density * step[None, :] / weight, np.ones(NODES))
    return float(lengths[NODES // 2])


@cache
def textbook_factor(weight: float, run_length: float) -> float:
    """L for a wanted average run length in control; a weight below 0.01 is taken as 0.01, a factor above 5 as 5.

    Examples
    --------
    >>> round(textbook_factor(0.05, 10_000.0), 3)
    3.627
    """
    weight = max(weight, SMALLEST_WEIGHT)
    if ewma_run_length(weight, WIDEST) <= run_length:
        return WIDEST
    return float(brentq(lambda factor: math.log(ewma_run_length(weight, factor) / run_length), NARROWEST, WIDEST))
