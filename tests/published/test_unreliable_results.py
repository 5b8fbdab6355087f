"""Expected unreliable results against closed forms.

The closed forms are derivations from the model of "Effect of analytical run length on QC performance and the QC planning process", Clinical
Chemistry 1997;43:2149-54, and "Assessing the impact of the frequency of quality control testing on the quality of reported patient
results", Clinical Chemistry 2008;54:2049-54 (both read in the abstract); their values were reproduced by an independent simulation of
four million runs (check_values.md 4.2 and 4.5). The tool computes them on a history of results with one control event every M results.
"""

from functools import cache

import numpy as np
import pytest

from pbm.methods.chain import Tracker
from pbm.methods.controls import Rules, rejection_probability
from pbm.methods.detection import by_schedule
from pbm.methods.expected import Exposure, Onsets, exposure, follow
from pbm.methods.trials import alarm_and_stop
from pbm.methods.unreliable import chance_unreliable
from tests.methods import exposed
from tests.published.record import published

SOURCE = "Clin Chem 1997;43:2149-54 and 2008;54:2049-54 (model READ-ABS, closed form REPRO)"
REACH = 40_000


def onsets_over_a_bracket(spacing: int, events: int) -> Onsets:
    """One onset at each of the M places of a bracket, followed by `events` control events."""
    end = np.full(spacing, (events + 1) * spacing)
    return follow(np.arange(spacing), end, np.arange(spacing, (events + 2) * spacing, spacing), events)


def passing(first: float, later: float, events: int) -> np.ndarray:
    """S_0 ... S_k for detection with `first` at the first event and `later` at each later one."""
    return np.concatenate([[1.0], (1 - first) * (1 - later) ** np.arange(events)])


@pytest.mark.parametrize(
    ("spacing", "first", "later", "total", "final"),
    [
        (100, 0.5, 0.5, 150.5, 75.25),
        (100, 0.9, 0.9, 61 + 11 / 18, 6 + 29 / 180),
        (200, 0.05, 0.05, 3900.5, 3705.475),
        (1, 0.5, 0.5, 2.0, 1.0),
        (100, 1.0, 1.0, 50.5, 0.0),
    ],
)
def test_schedule_alone_gives_the_closed_forms(
    spacing: int, first: float, later: float, total: float, final: float
) -> None:
    events = int(np.ceil(np.log(1e-14) / np.log(1 - later))) if later < 1 else 2
    onsets = onsets_over_a_bracket(spacing, events)
    found = exposure(onsets, np.ones((events + 2) * spacing), passing(first, later, events))
    ours = float(found.unreliable(onsets.length).mean())
    ours_final = float(found.unreliable_final(onsets.length).mean())
    published(f"E(N), M={spacing}, P1={first}, P={later}", SOURCE, total, ours, 1e-10 * total)
    published(f"E(N final), M={spacing}, P1={first}, P={later}", SOURCE, final, ours_final, 1e-10 * total)
    correctable = first * (spacing + 1) / 2 + (1 - first) * spacing
    published(f"E(N correctable), M={spacing}, P1={first}", SOURCE, correctable, ours - ours_final, 1e-9 * total)
    detected = by_schedule(onsets, passing(first, later, events)).mean_each().mean()
    published(f"mean results until the schedule finds it, M={spacing}", SOURCE, total, float(detected), 1e-9 * total)


def with_alarm_chances(found: Exposure, survival: np.ndarray) -> tuple[float, float]:
    """E(N) and E(N final) averaged over the alarm time T, P(T > n) = survival[n]."""
    chance = -np.diff(survival)
    reported = exposed.reported(found)[:, 1 : len(chance) + 1] @ chance
    final = exposed.final(found)[:, 1 : len(chance) + 1] @ chance
    return float(reported.mean()), float(final.mean())


@pytest.mark.parametrize(
    ("spacing", "first", "later", "q", "total", "final"),
    [
        (100, 0.5, 0.5, 0.02, 38.6200, 8.8854),
        (100, 0.3, 0.3, 0.005, 118.2739, 65.8794),
        (50, 0.8, 0.4, 0.05, 14.3426, 1.2804),
    ],
)
def test_schedule_with_a_geometric_monitor_gives_the_closed_forms(
    spacing: int, first: float, later: float, q: float, total: float, final: float
) -> None:
    events = 8_000 // spacing
    onsets = onsets_over_a_bracket(spacing, events)
    found = exposure(onsets, np.ones((events + 2) * spacing), passing(first, later, events))
    ours, ours_final = with_alarm_chances(found, (1 - q) ** np.arange(events * spacing))
    published(f"E(N) with a geometric monitor, M={spacing}, q={q}", SOURCE, total, ours, 6e-5)
    published(f"E(N final) with a geometric monitor, M={spacing}, q={q}", SOURCE, final, ours_final, 6e-5)


@cache
def ewma_alarm_times(runs: int) -> np.ndarray:
    """Results until an EWMA of weight 0.05 leaves 2.615 asymptotic SD under a shift of half a patient SD, from a fresh start."""
    random = np.random.default_rng(20_08)
    limit = 2.615 * np.sqrt(0.05 / 1.95)
    tracker = Tracker("ewma", 0.05, 0.0)
    length = 600
    z = random.standard_normal(runs * length) + 0.5
    starts = np.arange(runs) * length
    found = tracker.first_crossings(z, np.zeros((runs, 1)), starts, starts + length, -limit, limit)
    assert (found >= 0).all()
    return found - starts + 1


@pytest.mark.slow
def test_controls_and_an_ewma_monitor_together_give_the_published_gain() -> None:
    """M = 100, 1-3s on two controls, error 2 analytic SD, patient SD 4 analytic SD (check_values.md 4.5, REPRO)."""
    caught = rejection_probability(Rules.parse(["1-3s"]), np.array([2.0, 2.0]), 1.0, np.array([1, 1])).value
    events = 80
    onsets = onsets_over_a_bracket(100, events)
    found = exposure(onsets, np.ones((events + 2) * 100), passing(caught, caught, events))
    published("E(N), M=100, 1-3s N=2 alone", SOURCE, 292.802, float(found.unreliable(onsets.length).mean()), 5e-4)
    published(
        "E(N final), M=100, 1-3s N=2 alone", SOURCE, 207.263, float(found.unreliable_final(onsets.length).mean()), 5e-4
    )
    runs = 400_000
    times = ewma_alarm_times(runs)
    place = np.random.default_rng(5).integers(0, 100, runs)
    reported, final = exposed.reported(found)[place, times], exposed.final(found)[place, times]
    for name, expected, each in (("E(N)", 27.196, reported), ("E(N final)", 3.783, final)):
        tolerance = 3.5 * float(each.std()) / np.sqrt(runs)
        published(f"{name}, M=100, 1-3s N=2 with EWMA .05", SOURCE, expected, float(each.mean()), tolerance)
    unreliable = float(chance_unreliable(np.array(4.0), np.array(2.0), np.array(1.0)))
    published("chance beyond TEa = 4 SD under a shift of 2 SD", SOURCE, 0.0226868, unreliable, 5e-8)


def test_a_response_lag_adds_results_after_the_alarm_and_never_passes_the_horizon() -> None:
    onsets = onsets_over_a_bracket(10, 3)
    time = np.arange(60) * 1_000_000
    to_alarm = np.array([0, 5] * 5)
    alarm, stop = alarm_and_stop(to_alarm, onsets, 4, 0, time)
    assert (stop[1::2] == 9).all()
    assert (alarm[::2] == onsets.length[::2]).all() and (stop[::2] == onsets.length[::2]).all()
    _, by_minutes = alarm_and_stop(to_alarm, onsets, 0, 3_000_000, time)
    assert (by_minutes[1::2] == 8).all()
