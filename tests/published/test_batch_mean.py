"""The batch-weighted moving mean of the haematology literature: worked batches, stationary behaviour, answer to a shift."""

import math

import numpy as np
import pytest

from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats
from tests.published.record import published
from tests.published.simulation import SHARP, WHOLE, mean, shifted

SOURCE = "law: Am J Clin Pathol 1974;61:473-481 (MEM), exponent .66 READ-ABS; figure by independent computation (REPRO)"
FIRST = (
    88.1, 90.3, 91.0, 89.5, 92.2, 87.4, 90.0, 95.1, 89.9, 90.6, 86.0, 91.8, 90.2, 88.8, 93.0, 90.9, 78.5, 89.1, 91.4, 90.5,
)  # fmt: skip
SECOND = (
    29.0, 30.0, 31.0, 29.5, 30.5, 28.0, 32.0, 30.2, 29.8, 30.1, 27.0, 33.0, 30.4, 29.6, 30.3, 29.7, 31.5, 28.5, 30.6, 22.0,
)  # fmt: skip


def after(batch: Floats, begin: float, exponent: float = 0.5) -> float:
    """The estimate after one batch."""
    path = Tracker("batch", len(batch), begin, (exponent,)).path(batch)
    assert np.isnan(path[:-1]).all(), "a batch is judged once, at its end"
    return float(path[-1])


def test_worked_batches() -> None:
    """Twenty values a batch: all at one distance; a fraction f at distance a moves the estimate by f^2 a; mixed batches."""
    published("all 20 at 91, B = 90", SOURCE, 91.0, after(np.full(20, 91.0), 90.0), 1e-12)
    for count, expected in ((5, 90.0625), (10, 90.25), (15, 90.5625), (20, 91.0)):
        batch = np.array([91.0] * count + [90.0] * (20 - count))
        published(f"{count} of 20 at 91, the rest at 90", SOURCE, expected, after(batch, 90.0), 1e-12)
    published("16 of 20 at +1, 4 at -4", SOURCE, 0.16, after(np.array([1.0] * 16 + [-4.0] * 4), 0.0), 1e-12)
    published("first worked batch, P = 1/2", SOURCE, 90.002373169401, after(np.array(FIRST), 90.0), 1e-12)
    published("first worked batch, P = 1 (its mean)", SOURCE, 89.715, after(np.array(FIRST), 90.0, 1.0), 1e-12)
    for exponent, printed in ((0.5, "29.992451842"), (0.66, "29.943198925"), (1.0, "29.635")):
        published(f"second worked batch, P = {exponent:g}", SOURCE, printed, after(np.array(SECOND), 30.0, exponent), 0)


@pytest.mark.parametrize(
    ("size", "exponent", "sd", "correlation"),
    [(20, 0.5, 0.1050, 0.696), (20, 0.66, 0.1398, 0.465), (20, 1.0, 0.2236, 0.0), (10, 0.5, 0.1850, 0.554), (50, 0.5, 0.0505, 0.815)],
)  # fmt: skip
def test_stationary_spread_and_correlation_on_normal_values(
    size: int, exponent: float, sd: float, correlation: float
) -> None:
    """Simulated figures of a million batches, good to .3 %."""
    z = shifted(0.0, WHOLE // 4)
    estimates = Tracker("batch", size, 0.0, (exponent,)).path(z)[size - 1 :: size]
    # Estimates further apart than about 50 batches share nothing, so that means over blocks are independent figures.
    blocks = estimates[200 : len(estimates) // 200 * 200].reshape(-1, 200)
    square = mean((blocks**2).mean(axis=1))
    product = mean((blocks[:, 1:] * blocks[:, :-1]).mean(axis=1))
    ours = math.sqrt(square.value)
    name = f"N={size}, P={exponent:g}"
    published(f"SD of the estimate, {name}", SOURCE, sd, ours, SHARP * square.error / (2 * ours) + 0.003 * sd)
    allowed = SHARP * product.error / square.value + 0.003
    published(
        f"correlation of successive estimates, {name}", SOURCE, correlation, product.value / square.value, allowed
    )


def test_answer_of_the_first_batch_to_a_shift() -> None:
    """Twenty values, P = 1/2, the estimate starts at the old level: only 27 % of a small shift is followed in one batch."""
    tracker, z = Tracker("batch", 20, 0.0, (0.5,)), shifted(0.0, 400_000).reshape(-1, 20)
    exact = 2**-0.25 * math.gamma(0.25) / math.sqrt(math.pi)
    exact *= math.sqrt(2 / math.pi) * math.sqrt(math.sqrt(2 / math.pi) / 20)
    published("slope at small shifts, closed form", SOURCE, 0.2741, exact, 5e-5)
    for shift, expected in ((0.05, 0.0137), (0.1, 0.0280), (0.25, 0.0795), (0.5, 0.2132), (1.0, 0.6611), (2.0, 1.8175)):
        up, down = (np.array([tracker.path(batch + s)[-1] for batch in z]) for s in (shift, -shift))
        ours = mean((up - down) / 2)  # the same batches shifted both ways: most of the chance cancels
        published(
            f"mean answer to a shift of {shift:g} SD",
            SOURCE,
            expected,
            ours.value,
            SHARP * ours.error + 0.01 * expected,
        )
