"""The largest expected number of final unreliable results over all error sizes, for control rules at a sigma.

Rejection by the tool's rules, chance beyond TEa and expected counts by the tool's own formulas, on a history with a control event every M
results. Ours is linear in 1/M (the onset falls on a result); the printed figures are for a continuous stream, so two M are extrapolated.
"""

from functools import cache

import numpy as np
from scipy.optimize import minimize_scalar

from pbm.methods.controls import Rules, rejection_probability
from pbm.methods.expected import exposure, follow
from pbm.methods.unreliable import chance_unreliable
from tests.published.record import published
from tests.published.values import lines
from tests.published.values import unreliable as values


def rejected(rules: str, controls: int, shift: float) -> float:
    """P(one event rejects) at a shift of all its controls."""
    one_each = np.ones(controls, dtype=np.int64)
    return rejection_probability(
        Rules.parse(rules.split(), scope="event"), np.full(controls, shift), 1.0, one_each
    ).value


def final_per_result(spacing: int, p: float, found: float) -> float:
    """E(Nuf)/M with an event every M results that finds the error with the same chance each time."""
    events = int(np.ceil(np.log(1e-10) / np.log1p(-found))) + 1
    length = (events + 2) * spacing
    onsets = follow(np.arange(spacing), np.full(spacing, length - spacing), np.arange(spacing, length, spacing), events)
    exposed = exposure(onsets, np.full(length, p), np.power(1 - found, np.arange(events + 1)))
    return float(exposed.unreliable_final(onsets.length).mean()) / spacing


@cache
def final_per_result_of_a_continuous_stream(rules: str, controls: int, sigma: float, shift: float) -> float:
    """E(Nuf)/M for many results between events."""
    p = float(chance_unreliable(np.array(sigma), np.array(shift), np.array(1.0)))
    found = rejected(rules, controls, shift)
    return 2 * final_per_result(20, p, found) - final_per_result(10, p, found)


def worst(rules: str, controls: int, sigma: float) -> tuple[float, float]:
    """Worst shift, and the largest E(Nuf)/M."""
    grid = np.arange(0.5, 5.01, 0.25)
    top = grid[np.argmax([final_per_result_of_a_continuous_stream(rules, controls, sigma, s) for s in grid])]
    found = minimize_scalar(
        lambda shift: -final_per_result_of_a_continuous_stream(rules, controls, sigma, float(shift)),
        bounds=(top - 0.25, top + 0.25),
        method="bounded",
        options={"xatol": 1e-5},
    )
    return float(found.x), -float(found.fun)


def test_largest_number_of_final_unreliable_results_over_error_sizes() -> None:
    """Worst shift, largest E(Nuf)/M, and the M that keeps it at 1. REPRO; .1 % on the largest, .01 on the shift.

    Published guidance on run sizes (Am J Clin Pathol 2019;151:364-70, numbers MEM), read off a nomogram: about 450 at sigma 5 with the
    rules of two controls, 200 at sigma 4 with those of four; 475 and 180 here.
    """
    for rules, controls, sigma, shift, largest, spacing in lines(values.LARGEST):
        at, ours = worst(rules, int(controls), float(sigma))
        where = f"{rules}, N={controls}, sigma {sigma}"
        published(f"largest E(Nuf)/M: {where}", values.LARGEST_SOURCE, largest, ours, 1e-3 * float(largest))
        if shift != "-":
            published(f"worst shift (SD): {where}", values.LARGEST_SOURCE, float(shift), at, 0.01)
            published(f"M for E(Nuf) = 1: {where}", values.LARGEST_SOURCE, spacing, 1 / ours, 1e-3 * float(spacing))
