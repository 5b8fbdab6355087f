"""Moving mean against independent figures: results from an onset in mid-stream, the window full of in-control values, to the alarm."""

import math

import numpy as np

from pbm.methods.chain import Tracker
from tests.published.record import published
from tests.published.simulation import SHARP, delay, mean, run_lengths, shifted
from tests.published.values import lines
from tests.published.values import moving_mean as values


def test_run_lengths_of_a_moving_mean_of_two() -> None:
    """N = 2, limits at 2.5 and 3 SD of the mean. REPRO, exact to five places; tolerance 3.5 standard errors of our simulation."""
    for factor, figures in lines(values.EXACT):
        for shift, figure in zip(values.EXACT_SHIFTS, figures.split(), strict=True):
            ours = delay(Tracker("mean", 2, 0.0), shift, float(factor) / math.sqrt(2), float(figure))
            quantity = f"results to alarm: moving mean of 2, L {factor}, shift {shift:g}"
            published(quantity, values.EXACT_SOURCE, figure, ours.value, SHARP * ours.error)


def test_run_lengths_of_longer_moving_means() -> None:
    """N = 3, 10 and 50, limits at 3 SD of the mean. REPRO by simulation; tolerance 3.5 standard errors of the difference."""
    for window, figures, errors in lines(values.SIMULATED):
        limit = 3 / math.sqrt(int(window))
        for shift, figure, error in zip(values.SIMULATED_SHIFTS, figures.split(), errors.split(), strict=True):
            ours = delay(Tracker("mean", int(window), 0.0), shift, limit, float(figure))
            quantity = f"results to alarm: moving mean of {window}, L 3, shift {shift:g}"
            published(
                quantity, values.SIMULATED_SOURCE, figure, ours.value, SHARP * math.hypot(ours.error, float(error))
            )


def test_a_single_evaluation_is_out_as_often_as_the_normal_tail_says() -> None:
    """P(one evaluation beyond +-3 SD of the mean) = 2 Phi(-3), and correlation 1 - k/N between evaluations k apart. Exact."""
    path = Tracker("mean", 10, 0.0).path(shifted(0.0, 5_000_000))[9:]
    apart = path[::10]
    out = (np.abs(apart) > 3 / math.sqrt(10)).mean()
    published("P(moving mean of 10 out)", "2 Phi(-3)", 0.002699796, float(out), SHARP * math.sqrt(0.0027 / len(apart)))
    for k in (1, 5, 10):
        ours = float(np.corrcoef(path[:-k], path[k:])[0, 1])
        published(
            f"correlation of moving means of 10, {k} apart",
            "1 - k/N",
            1 - k / 10,
            ours,
            SHARP * 3 / math.sqrt(len(path)),
        )


def test_a_window_that_is_not_full_is_not_judged() -> None:
    """From a fresh start nothing can be out before the N-th value; judged earlier, the limits would have to be wider. Derived."""
    lengths = run_lengths(Tracker("mean", 10, 0.0), shifted(3.0, 100_000), 3 / math.sqrt(10))
    assert int(lengths.min()) == 10
    published(
        "results to alarm from an empty window of 10, shift 3",
        "every run ends when the window fills",
        10.0,
        mean(lengths).value,
        1e-3,
    )
