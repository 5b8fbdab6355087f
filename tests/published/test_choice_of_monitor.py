"""The chosen monitor against the best possible one: on independent normal data with one known shift that is the CUSUM of that shift.

Optimality of the CUSUM: "Optimal stopping times for detecting changes in distributions", Annals of Statistics 1986;14:1379-87. Its limits
for an average run length of 1000 in control are those of check_values.md 2 (design h, REPRO); run lengths of both are simulated alike
(tests/evidence/quality.py).
"""

import pytest

from tests.evidence.quality import ASKED, SHIFTS, chosen_for, optimal, racer

DESIGN_H = {0.5: 5.7574, 0.25: 9.9312}  # reference k -> h, two-sided, average run length 1000


@pytest.mark.slow
@pytest.mark.parametrize(
    "shift", [pytest.param(shift, marks=[] if shift == 1 else [pytest.mark.full]) for shift in SHIFTS]
)
def test_the_chosen_monitor_needs_at_most_a_seventh_more_results_than_the_optimal_cusum(shift: float) -> None:
    best = optimal(shift)
    # A run length of 1000 in 4 million results is good to 1.6 %, which moves h by about a hundredth.
    assert best.distance == pytest.approx(DESIGN_H.get(shift / 2, best.distance), abs=0.04)
    needed = racer(chosen_for(shift)).delay(shift)
    assert needed <= ASKED * best.delay(shift)
    assert needed > 0.98 * best.delay(shift), "nothing undercuts the optimum by more than the error of the simulation"
