"""CUSUM against print: the handbook's worked example, average run lengths by simulation of the tool's own monitor."""

import math

import numpy as np
import pytest

from pbm.methods.chain import Tracker
from tests.published.record import published
from tests.published.simulation import SHARP, WHOLE, Mean, mean, shifted
from tests.published.values import cusum as values

SHORT = WHOLE // 10


def scheme(reference: float) -> Tracker:
    """A CUSUM on standard normal values."""
    return Tracker("cusum", reference, 0.0, (0.0, 1.0))


def two_sided(tracker: Tracker, h: float, shift: float, count: int, begin: tuple[float, float] = (0.0, 0.0)) -> Mean:
    """Values from the begin of a run to the alarm, the shift there from the first on."""
    return mean(np.diff(tracker.run_ends(shifted(shift, count), -h, h, np.array(begin)), prepend=-1))


def one_sided(tracker: Tracker, h: float, shift: float, count: int) -> Mean:
    """Values between alarms of the upper sum while the lower runs beside it.

    When one sum crosses, the other stands at 0, so that starting both again changes nothing for the other.
    """
    z = shifted(shift, count)
    ends = tracker.run_ends(z, -h, h)
    return mean(np.diff(ends[z[ends] > 0], prepend=-1))


def test_the_worked_example_of_the_handbook() -> None:
    """Target 325, k = .3175, h = 4.1959: both sums, the first alarm at mean 14, and the plain sum of deviations."""
    source, tracker = values.HANDBOOK_SOURCE, Tracker("cusum", 0.3175, 0.0, (325.0, 1.0))
    state, sums, shown = tracker.start(), [], []
    for z in values.HANDBOOK_MEANS:
        shown.append(tracker.law.step(state, z, tracker.par))
        sums.append(tuple(state))
    for place, expected in enumerate(values.HANDBOOK_UPPER_FROM_13, start=13):
        published(f"upper sum at mean {place}", source, expected, sums[place - 1][0], 1e-9)
        published(f"signed statistic at mean {place}", source, expected, shown[place - 1], 1e-9)
    lower = [down for _, down in sums]
    published("largest lower sum", source, 0.715, max(lower), 1e-9)
    published("mean with the largest lower sum", source, 8, 1 + lower.index(max(lower)), 0)
    first = tracker.run_ends(np.array(values.HANDBOOK_MEANS), -4.1959, 4.1959)[0]
    published("mean of the first alarm", source, 14, 1 + first, 0)
    published("plain sum of deviations", source, 19.075, math.fsum(m - 325 for m in values.HANDBOOK_MEANS), 1e-9)


@pytest.mark.parametrize(
    ("h", "head_start", "source", "printed", "exact"),
    values.TWO_SIDED,
    ids=lambda v: f"{v:g}" if isinstance(v, float) else "-",
)
def test_average_run_length_of_the_two_sided_scheme_with_and_without_a_head_start(
    h: float, head_start: float, source: str, printed: str, exact: str
) -> None:
    """k = .5, shift from the first value on; every run of the simulation is a run of the tool's own monitor."""
    for shift, print_, value in zip(values.SHIFTS, printed.split(), exact.split(), strict=True):
        ours = two_sided(scheme(0.5), h, shift, SHORT if shift else WHOLE, (head_start, head_start))
        quantity = f"ARL, h={h:g}, head start {head_start:g}, shift {shift:g}"
        published(quantity, source, print_, ours.value, SHARP * ours.error)
        published(quantity, values.REPRO_SOURCE, value, ours.value, SHARP * ours.error)


@pytest.mark.parametrize(("h", "exact"), values.ONE_SIDED, ids=["h=4", "h=5"])
def test_one_sided_run_lengths_are_those_between_upper_alarms(h: float, exact: str) -> None:
    """In control a one-sided scheme runs twice as long as the two-sided one: the two must not be confused."""
    for shift, value in zip(values.SHIFTS, exact.split(), strict=True):
        ours = one_sided(scheme(0.5), h, shift, SHORT if shift else WHOLE)
        published(
            f"one-sided ARL, k=.5, h={h:g}, shift {shift:g}", values.REPRO_SOURCE, value, ours.value, SHARP * ours.error
        )


@pytest.mark.parametrize(
    ("k", "h", "shift", "source", "printed", "exact"),
    values.ONE_SIDED_ANCHORS,
    ids=lambda v: f"{v:g}" if isinstance(v, float) else "-",
)
def test_one_sided_run_lengths_of_other_sources(
    k: float, h: float, shift: float, source: str, printed: str, exact: float
) -> None:
    """Other references and decision intervals."""
    ours = one_sided(scheme(k), h, shift, WHOLE if shift < 0 else SHORT)
    published(f"one-sided ARL, k={k:g}, h={h:g}, shift {shift:g}", source, printed, ours.value, SHARP * ours.error)
    published(
        f"one-sided ARL, k={k:g}, h={h:g}, shift {shift:g}", values.REPRO_SOURCE, exact, ours.value, SHARP * ours.error
    )


def test_a_large_shift_with_and_without_a_small_head_start() -> None:
    """k = .25, h = 8, shift 2.5: nearly every run takes four values. READ; the lower sum plays no part."""
    source = "manual page xcusum.arl of the package spc (READ)"
    for head_start, expected in ((0.0, 4.1500836225), (0.1, 4.1061588131)):
        ours = two_sided(scheme(0.25), 8.0, 2.5, SHORT, (head_start, 0.0))
        published(f"ARL, k=.25, h=8, shift 2.5, start {head_start:g}", source, expected, ours.value, SHARP * ours.error)
    ours = two_sided(scheme(0.6), 3.0, -0.2, SHORT)
    published("ARL, k=.6, h=3, shift -.2", source, "65.4", ours.value, SHARP * ours.error)


@pytest.mark.parametrize(("in_control", "half", "quarter"), values.DESIGN)
def test_decision_intervals_give_the_run_length_they_are_designed_for(
    in_control: float, half: float, quarter: float
) -> None:
    """Two-sided, no shift. REPRO."""
    for k, h in ((0.5, half), (0.25, quarter)):
        ours = two_sided(scheme(k), h, 0.0, WHOLE)
        published(f"ARL in control, k={k:g}, h={h:g}", values.REPRO_SOURCE, in_control, ours.value, SHARP * ours.error)
