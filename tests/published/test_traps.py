"""Traps of run lengths: late onsets, truncation, offered against accepted results, a window that is not yet full."""

import math

import numpy as np
import pytest

from pbm.methods.chain import Preparation, Tracker
from pbm.methods.jit import Floats
from tests.published.record import published
from tests.published.simulated import Average, average_run_length, normals

EQUATION = "integral equation, Gauss-Legendre (REPRO)"
TRUNCATED = "collocation, confirmed by simulation (REPRO)"
MOVING_MEAN = "Chebyshev collocation (REPRO)"
BEFORE, AFTER = 300, 700


def ewma(weight: float, width: float, spread: float = 1.0) -> tuple[Tracker, float]:
    """An EWMA about 0 and its fixed limit, `width` asymptotic SDs from the centre."""
    return Tracker("ewma", weight, 0.0), width * spread * math.sqrt(weight / (2 - weight))


@pytest.mark.parametrize(
    ("weight", "width", "shift", "at_once", "late"),
    [
        (0.1, 2.814, 0.5, 31.297, 30.57),
        (0.1, 2.814, 1.0, 10.331, 10.12),
        (0.1, 2.814, 2.0, 4.362, 4.31),
        (0.05, 2.615, 0.5, 28.764, 28.00),
        (0.05, 2.615, 1.0, 11.383, 11.18),
        (0.05, 2.615, 3.0, 3.496, 3.47),
    ],
)
def test_an_error_that_begins_mid_stream_is_found_sooner_than_one_at_the_start(
    weight: float, width: float, shift: float, at_once: float, late: float
) -> None:
    """Run length from a fresh start, and from the state of a monitor that has run without alarm; the late figure is good to .5 %."""
    tracker, limit = ewma(weight, width)
    ours = average_run_length(tracker, -limit, limit, shift, parts=3)
    published(f"ARL from the start, w={weight}, shift {shift:g}", EQUATION, at_once, ours.value, ours.allowed)
    ours = Average.of(np.concatenate([_late_run_lengths(tracker, limit, shift, part) for part in range(8)]))
    allowed = ours.allowed + 0.005 * late
    published(f"ARL from a late onset, w={weight}, shift {shift:g}", EQUATION, late, ours.value, allowed)


def _late_run_lengths(tracker: Tracker, limit: float, shift: float, part: int) -> Floats:
    """Onsets every so often in one stream, those left out that an alarm precedes; the harness of an appraisal in small."""
    z = normals(part)
    onsets = np.arange(BEFORE, len(z) - AFTER, BEFORE + AFTER)
    fresh = np.zeros((len(onsets), 1))
    quiet = onsets[tracker.first_crossings(z, fresh, onsets - BEFORE, onsets, -limit, limit) < 0]
    found = tracker.first_crossings(z + shift, tracker.states_at(z, quiet), quiet, quiet + AFTER, -limit, limit)
    assert (found >= 0).all()
    return (found - quiet + 1).astype(np.float64)


def _prepared(winsorize: bool, shift: float, part: int) -> Floats:
    z = normals(part) + shift
    return Preparation(-2.0, 2.0, winsorize).all(z, np.zeros(len(z)))


@pytest.mark.parametrize(
    ("weight", "width", "shift", "accepted", "offered"),
    [
        (0.1, 2.814, 0.0, 559.66, 586.3),
        (0.1, 2.814, 0.25, 140.07, 147.80),
        (0.1, 2.814, 0.5, 42.110, 45.427),
        (0.1, 2.814, 1.0, 13.946, 16.603),
        (0.1, 2.814, 2.0, 6.689, 13.380),
        (0.05, 2.615, 0.0, 513.8, 538.3),
        (0.05, 2.615, 0.25, 104.20, 109.95),
        (0.05, 2.615, 0.5, 35.951, 38.783),
        (0.05, 2.615, 1.0, 14.585, 17.363),
        (0.05, 2.615, 2.0, 7.755, 15.510),
    ],
)
def test_an_ewma_of_truncated_results_counted_in_accepted_and_in_offered_results(
    weight: float, width: float, shift: float, accepted: float, offered: float
) -> None:
    """Truncation at 2 SD lengthens the tail: a limit from a table for untruncated values (500 in control) gives 560. Tolerance .3 %."""
    tracker, limit = ewma(weight, width, math.sqrt(0.773741))
    in_accepted, in_offered = [], []
    for part in range(8 if shift < 0.5 else 2):
        z = _prepared(False, shift, part)
        ends = tracker.run_ends(z, -limit, limit)
        in_offered.append(np.diff(ends, prepend=-1).astype(np.float64))
        in_accepted.append(np.diff(np.cumsum(~np.isnan(z))[ends], prepend=0).astype(np.float64))
    for name, expected, lengths in (("accepted", accepted, in_accepted), ("offered", offered, in_offered)):
        ours = Average.of(np.concatenate(lengths))
        quantity = f"ARL in {name} results, truncated at 2 SD, w={weight}, shift {shift:g}"
        published(quantity, TRUNCATED, expected, ours.value, ours.allowed + 0.003 * expected)


@pytest.mark.parametrize(("shift", "expected"), [(0.0, 548.63), (0.25, 111.65), (0.5, 32.409), (1.0, 10.906)])
def test_an_ewma_of_winsorized_results(shift: float, expected: float) -> None:
    """Set to the limit instead of dropped, a far result still tells of the shift."""
    tracker, limit = ewma(0.1, 2.814, 0.959446)
    parts = 8 if shift < 0.5 else 2
    lengths = [
        np.diff(tracker.run_ends(_prepared(True, shift, part), -limit, limit), prepend=-1) for part in range(parts)
    ]
    ours = Average.of(np.concatenate(lengths).astype(np.float64))
    quantity = f"ARL, winsorized at 2 SD, w=.1, shift {shift:g}"
    published(quantity, "simulation (REPRO)", expected, ours.value, ours.allowed + 0.001 * expected)


@pytest.mark.parametrize(("limit", "slope"), [(1.0, 0.291125), (2.0, 0.773741), (3.0, 0.973337)])
def test_a_truncated_mean_moves_by_the_ratio_of_variances_of_a_small_shift(limit: float, slope: float) -> None:
    """A bias read off a truncated average is too small by Var(accepted) / sigma^2."""
    inside, shift = Preparation(-limit, limit), 0.01
    accepted = _accepted(inside, 0.0)
    variance = Average.of(accepted[~np.isnan(accepted)] ** 2)
    published(f"Var(accepted), limits {limit:g} SD", "closed form (REPRO)", slope, variance.value, variance.allowed)
    # The same values shifted both ways, so that little chance is left; blocks tell how much.
    up, down = (np.nanmean(_accepted(inside, side * shift).reshape(100, -1), axis=1) for side in (1, -1))
    ours = Average.of((up - down) / (2 * shift))
    published(
        f"movement of the accepted mean, limits {limit:g} SD", "closed form (REPRO)", slope, ours.value, ours.allowed
    )


def _accepted(inside: Preparation, shift: float) -> Floats:
    z = normals(0) + shift
    return inside.all(z, np.zeros(len(z)))


def _prefilled_run_lengths(window: int, width: float, shift: float, part: int, count: int) -> Floats:
    """Each run begins with a window that lacks one value, filled with in-control values; the next value is shifted."""
    z, tracker, limit = normals(part), Tracker("mean", window, 0.0), width / math.sqrt(window)
    lengths: list[float] = []
    faulty, place, ends = z + shift, 0, np.array([len(z)])
    while len(lengths) < count and place + window < len(z):
        state = tracker.start()
        for x in z[place : place + window - 1].tolist():
            tracker.law.step(state, x, tracker.par)
        first = place + window - 1
        found = tracker.first_crossings(faulty, np.array([state]), np.array([first]), ends, -limit, limit)[0]
        if found < 0:
            break
        lengths.append(float(found - first + 1))
        place = int(found) + 1
    return np.array(lengths)


@pytest.mark.parametrize(
    ("window", "width", "shift", "expected", "error"),
    [
        (2, 3.0, 0.0, 392.96369, 0.0),
        (2, 3.0, 0.5, 103.34017, 0.0),
        (2, 3.0, 1.0, 22.64369, 0.0),
        (2, 3.0, 2.0, 3.75852, 0.0),
        (2, 3.0, 3.0, 1.95984, 0.0),
        (2, 2.5, 0.0, 88.85784, 0.0),
        (2, 2.5, 1.0, 9.98014, 0.0),
        (3, 3.0, 0.5, 83.39, 0.08),
        (10, 3.0, 0.25, 202.88, 0.20),
        (10, 3.0, 1.0, 11.461, 0.007),
        (50, 3.0, 0.5, 43.61, 0.03),
        (50, 3.0, 2.0, 11.076, 0.006),
    ],
)
def test_a_moving_mean_with_a_window_filled_in_control(
    window: int, width: float, shift: float, expected: float, error: float
) -> None:
    """Exact for a window of 2, simulated (with the error told) for others."""
    lengths = [_prefilled_run_lengths(window, width, shift, part, 5_000) for part in range(2)]
    ours = Average.of(np.concatenate(lengths))
    quantity = f"ARL of a moving mean of {window}, limits {width:g} SD, shift {shift:g}"
    published(quantity, MOVING_MEAN, expected, ours.value, ours.allowed + 3.5 * error)


@pytest.mark.parametrize("statistic", ["mean", "median", "sd", "share"])
def test_a_window_is_never_judged_before_it_is_full(statistic: str) -> None:
    """A moving average judged before it is full would need wider limits."""
    more = (-1.0, 1.0) if statistic == "share" else ()
    path = Tracker(statistic, 25, 0.0, more).path(normals(0)[:60])
    assert np.isnan(path[:24]).all()
    assert not np.isnan(path[24:]).any()
