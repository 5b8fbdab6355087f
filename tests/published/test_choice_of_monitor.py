"""The chosen monitor against the best possible one: on independent normal data with one known shift that is the CUSUM of that shift.

Optimality of the CUSUM: "Optimal stopping times for detecting changes in distributions", Annals of Statistics 1986;14:1379-87. Its limits
for an average run length of 1000 in control are those of check_values.md 2 (design h, REPRO); run lengths of both are simulated alike.
"""

import numpy as np
import pytest

from pbm.methods.baseline import Mix
from pbm.methods.candidates import WHOLE_GRID, candidates, preparations
from pbm.methods.chain import Tracker
from pbm.methods.expected import follow
from pbm.methods.faults import Chance, Fault, Reporting
from pbm.methods.search import Runner, limited, onsets_for, scores, simplest_near_best
from pbm.methods.trials import Stretch, alarm_and_stop, draw_onsets, trial
from pbm.methods.unreliable import ErrorModel

ARL = 1_000
RESULTS = 100_000
DESIGN_H = {0.5: 5.7574, 0.25: 9.9312}  # reference k -> h, two-sided, average run length 1000


def chosen_for(shift: float) -> Runner:
    """The monitor that the search prefers for one shift (in SD), with one alarm in 1000 results allowed."""
    random = np.random.default_rng(8)
    value = np.round(random.standard_normal(RESULTS), 3)
    stretch = Stretch(
        np.arange(RESULTS) * 1_000_000,
        value,
        np.zeros(RESULTS),
        Mix.of(np.full(RESULTS, "", dtype=object), np.zeros(RESULTS, dtype=np.int64)),
        ErrorModel(2.0, 0.0, 0.1, 0.0),
        Reporting(0.001),
        Chance.draw(RESULTS, random),
    )
    given = list(candidates(preparations(value, 0.001, random), 2_000, WHOLE_GRID.shift))
    runners = limited(stretch, given, RESULTS / ARL)
    at = draw_onsets(1_000, RESULTS - 3_000, onsets_for(1), random)
    onsets = follow(at, at + 3_000, np.zeros(0, dtype=np.int64), 1)
    tried = trial(stretch, Fault("shift", shift, "unit"), onsets, np.ones(2))

    def stop(found: np.ndarray, onsets_: object) -> tuple[np.ndarray, np.ndarray]:
        return alarm_and_stop(found, onsets, 0, 0, stretch.time)

    return runners[simplest_near_best(runners, scores(stretch, runners, [(tried, 1.0)], stop))]


def run_length(tracker: Tracker, low: float, high: float, z: np.ndarray) -> float:
    """Average run length over values laid one run after the other."""
    ends = tracker.run_ends(z, low, high)
    return float(ends[-1] + 1) / len(ends)


def delay(tracker: Tracker, low: float, high: float, shift: float, random: np.random.Generator) -> float:
    """Mean results until the alarm for a shift that begins after 500 results in control without an alarm."""
    runs, before, after = 20_000, 500, 1_500
    z = random.standard_normal((runs, before + after))
    z[:, before:] += shift
    flat, starts = z.ravel(), np.arange(runs) * (before + after)
    fresh = np.repeat(np.array([tracker.start()]), runs, axis=0)
    found = tracker.first_crossings(flat, fresh, starts, starts + before + after, low, high) - starts
    return float((found[found >= before] - before + 1).mean())


@pytest.mark.slow
@pytest.mark.parametrize("shift", [0.5, 1.0])
def test_the_chosen_monitor_needs_at_most_a_seventh_more_results_than_the_optimal_cusum(shift: float) -> None:
    found = chosen_for(shift)
    prepared = found.candidate.preparation
    random = np.random.default_rng(9)
    z = random.standard_normal(4_000_000)
    cusum = Tracker("cusum", shift / 2, 0.0, (0.0, 1.0))
    h = DESIGN_H[shift / 2]
    assert run_length(cusum, -h, h, z) == pytest.approx(ARL, rel=0.06)
    # The limits of the chosen monitor are learned; they are widened or narrowed to the same run length in control before the race.
    width = found.limits.high - found.limits.centre
    for _ in range(12):
        width *= 1 + 0.15 * np.log(ARL / run_length(found.tracker, -width, width, prepared.all(z, np.zeros(len(z)))))
    ours = delay(found.tracker, -width, width, shift, random)
    best = delay(cusum, -h, h, shift, random)
    assert ours <= 1.15 * best
