"""Moving mean, median, SD and share, EWMA and exponentially weighted SD against print and exact distributions."""

import math

import numpy as np
import pytest
from scipy.stats import binom, chi2, norm

from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats
from tests.published.record import published
from tests.published.simulation import SHARP, WHOLE, mean, shifted

ORDER_STATISTICS = "order-statistic quadrature (REPRO)"
CHI_SQUARE = "chi-square and binomial distributions (REPRO)"
SHORT = WHOLE // 10


def windows(tracker: Tracker, count: int, sd: float = 1.0) -> Floats:
    """The statistic of windows that share no value."""
    window = int(tracker.parameter)
    return tracker.path(sd * shifted(0.0, count))[window - 1 :: window]


@pytest.mark.parametrize(
    ("window", "expected"),
    [(3, 1.34601), (5, 1.43417), (9, 1.49491), (11, 1.50879), (25, 1.54366), (51, 1.55753), (101, 1.56411)],
)
def test_the_variance_of_a_moving_median_of_normal_values(window: int, expected: float) -> None:
    """n times the variance of the median of n values; it rises to pi / 2."""
    ours = mean(windows(Tracker("median", window, 0.0), 2 * SHORT) ** 2)
    published(
        f"n Var(median), n={window}", ORDER_STATISTICS, expected, window * ours.value, window * SHARP * ours.error
    )


@pytest.mark.parametrize(
    ("window", "expected"),
    [(2, 0.797885), (5, 0.939986), (10, 0.972659), (20, 0.986934), (25, 0.989640), (50, 0.994911)],
)
def test_the_expected_moving_sd_of_normal_values_is_c4(window: int, expected: float) -> None:
    """Mean of the sample SD in units of the true SD."""
    ours = mean(windows(Tracker("sd", window, 1.0), SHORT))
    published(f"c4, n={window}", "c4 = sqrt(2/(n-1)) G(n/2)/G((n-1)/2)", expected, ours.value, SHARP * ours.error)


def test_the_power_of_a_moving_sd_of_twenty() -> None:
    """One-sided limit with a false alarm in a thousand evaluations, then SD times 1.2, 1.5 and 2."""
    limit = math.sqrt(chi2.isf(0.001, 19) / 19)
    published("limit of the moving SD, n=20, alpha=.001", CHI_SQUARE, 1.518659, limit, 1e-6)
    for sd, expected in ((1.0, 0.001), (1.2, 0.04657), (1.5, 0.42673), (2.0, 0.92534)):
        ours = mean((windows(Tracker("sd", 20, 1.0), 2 * SHORT, sd) > limit).astype(float))
        published(f"P(moving SD beyond limit), n=20, SD x {sd:g}", CHI_SQUARE, expected, ours.value, SHARP * ours.error)


@pytest.mark.parametrize(("outside", "expected"), [(0.05, 0.0031883), (0.10, 0.1221451), (0.20, 0.8095902)])
def test_the_chance_of_eight_or_more_of_fifty_values_outside(outside: float, expected: float) -> None:
    """The limit of a share lies between two multiples of 1/N: here between 7/50 and 8/50."""
    assert binom.sf(7, 50, outside) == pytest.approx(expected, abs=5e-8)
    d = float(norm.isf(outside / 2))
    ours = mean((windows(Tracker("share", 50, outside, (-d, d)), 4 * SHORT) > 7.5 / 50).astype(float))
    published(f"P(8 or more of 50 outside), p={outside:g}", CHI_SQUARE, expected, ours.value, SHARP * ours.error)


@pytest.mark.parametrize("window", [10, 50])
def test_the_ewma_of_weight_2_over_n_plus_1_has_the_variance_of_a_mean_of_n(window: int) -> None:
    """Variance 1/N = weight/(2 - weight); correlation (1 - weight)^k between values k apart."""
    weight, source = 2 / (window + 1), "exact marginal facts (REPRO)"
    path = Tracker("ewma", weight, 0.0).path(shifted(0.0, SHORT))[500:]
    for lag in (0, 1, window // 2):
        at = np.arange(0, len(path) - lag, 10 * window)
        ours = mean(window * path[at] * path[at + lag])
        quantity = f"N times covariance of the EWMA, N={window}, lag {lag}"
        published(quantity, source, (1 - weight) ** lag, ours.value, SHARP * ours.error)


@pytest.mark.parametrize("weight", [0.05, 0.2])
def test_the_exponentially_weighted_mean_square_has_the_mean_and_variance_of_its_law(weight: float) -> None:
    """E(v) = sigma^2 and Var(v) = 2 sigma^4 w/(2 - w) on normal values; a shift of d adds d^2."""
    source = "moments of the exponentially weighted mean square, J Qual Technol 1993;25:106-118 (MEM, REPRO)"
    spaced = int(20 / weight)
    for shift in (0.0, 0.5):
        v = Tracker("ewsd", weight, 1.0, (0.0,)).path(shifted(shift, SHORT))[500::spaced] ** 2
        ours = mean(v)
        published(f"E(v), w={weight:g}, shift {shift:g}", source, 1 + shift**2, ours.value, SHARP * ours.error)
    v = Tracker("ewsd", weight, 1.0, (0.0,)).path(shifted(0.0, SHORT))[500::spaced] ** 2
    ours = mean((v - 1) ** 2)
    published(f"Var(v), w={weight:g}", source, 2 * weight / (2 - weight), ours.value, SHARP * ours.error)
