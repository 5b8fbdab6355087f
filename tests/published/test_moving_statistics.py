"""Moving mean, median, SD and share, EWMA and exponentially weighted SD against print and exact distributions."""

import math

import numpy as np
import pytest
from scipy.stats import binom, chi2, norm

from pbm.methods.chain import Tracker
from pbm.methods.jit import Floats
from tests.published.record import published
from tests.published.simulated import Average, normals

EWMA_SOURCE = "NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.4 (data MEM, figures REPRO)"
EWMA_DATA = "52.0 47.0 53.0 49.3 50.1 47.0 51.0 50.1 51.2 50.5 49.6 47.6 49.9 51.3 47.8 51.2 52.6 52.4 53.6 52.1"
EWMA_SERIES = "50.60 49.52 50.56 50.18 50.16 49.21 49.75 49.85 50.26 50.33 50.11 49.36 49.52 50.05 49.38 49.92 50.73 51.23 51.94 51.99"
ORDER_STATISTICS = "order-statistic quadrature (REPRO)"
CHI_SQUARE = "chi-square and binomial distributions (REPRO)"


def windows(tracker: Tracker, parts: int = 1, sd: float = 1.0) -> Floats:
    """The statistic of windows that share no value."""
    window = int(tracker.parameter)
    return np.concatenate([tracker.path(sd * normals(part))[window - 1 :: window] for part in range(parts)])


def variance(figures: Floats) -> Average:
    """Variance of figures with a mean of 0."""
    return Average.of(figures**2)


def test_the_ewma_series_of_the_handbook() -> None:
    """Target 50, weight .3: twenty values; limits 50 -+ 3 s sqrt(.3/1.7) with s = 2.0539, none of them crossed."""
    z = np.array([float(x) for x in EWMA_DATA.split()])
    path = Tracker("ewma", 0.3, 50.0).path(z)
    for place, (expected, ours) in enumerate(zip(EWMA_SERIES.split(), path, strict=True), start=1):
        published(f"EWMA {place}", EWMA_SOURCE, expected, float(ours), 0)
    width = 3 * 2.0539 * math.sqrt(0.3 / 1.7)
    published("upper limit", EWMA_SOURCE, 52.5884, 50 + width, 2e-4)
    published("lower limit", EWMA_SOURCE, 47.4115, 50 - width, 2e-4)
    assert (np.abs(path - 50) < width).all()


@pytest.mark.parametrize(
    ("window", "expected"),
    [(3, 1.34601), (5, 1.43417), (9, 1.49491), (11, 1.50879), (25, 1.54366), (51, 1.55753), (101, 1.56411)],
)
def test_the_variance_of_a_moving_median_of_normal_values(window: int, expected: float) -> None:
    """n times the variance of the median of n values; it rises to pi / 2."""
    ours = variance(windows(Tracker("median", window, 0.0), parts=2))
    published(f"n Var(median), n={window}", ORDER_STATISTICS, expected, window * ours.value, window * ours.allowed)


@pytest.mark.parametrize(
    ("window", "expected"),
    [(2, 0.797885), (5, 0.939986), (10, 0.972659), (20, 0.986934), (25, 0.989640), (50, 0.994911)],
)
def test_the_expected_moving_sd_of_normal_values_is_c4(window: int, expected: float) -> None:
    """Mean of the sample SD in units of the true SD."""
    ours = Average.of(windows(Tracker("sd", window, 1.0)))
    published(f"c4, n={window}", "c4 = sqrt(2/(n-1)) G(n/2)/G((n-1)/2)", expected, ours.value, ours.allowed)


def test_the_power_of_a_moving_sd_of_twenty() -> None:
    """One-sided limit with a false alarm in a thousand evaluations, then SD times 1.2, 1.5 and 2."""
    limit = math.sqrt(chi2.isf(0.001, 19) / 19)
    published("limit of the moving SD, n=20, alpha=.001", CHI_SQUARE, 1.518659, limit, 1e-6)
    for sd, expected in ((1.0, 0.001), (1.2, 0.04657), (1.5, 0.42673), (2.0, 0.92534)):
        ours = Average.of((windows(Tracker("sd", 20, 1.0), parts=2, sd=sd) > limit).astype(float))
        published(f"P(moving SD beyond limit), n=20, SD x {sd:g}", CHI_SQUARE, expected, ours.value, ours.allowed)


@pytest.mark.parametrize(("outside", "expected"), [(0.05, 0.0031883), (0.10, 0.1221451), (0.20, 0.8095902)])
def test_the_chance_of_eight_or_more_of_fifty_values_outside(outside: float, expected: float) -> None:
    """The limit of a share lies between two multiples of 1/N: here between 7/50 and 8/50."""
    assert binom.sf(7, 50, outside) == pytest.approx(expected, abs=5e-8)
    d = float(norm.isf(outside / 2))
    ours = Average.of((windows(Tracker("share", 50, outside, (-d, d)), parts=4) > 7.5 / 50).astype(float))
    published(f"P(8 or more of 50 outside), p={outside:g}", CHI_SQUARE, expected, ours.value, ours.allowed)


@pytest.mark.parametrize("window", [10, 50])
def test_a_moving_mean_and_the_ewma_of_the_same_variance(window: int) -> None:
    """Variance 1/w = weight/(2 - weight) at weight = 2/(w + 1); correlations 1 - k/w and (1 - weight)^k; chance beyond 3 SD."""
    weight = 2 / (window + 1)
    mean, ewma = Tracker("mean", window, 0.0), Tracker("ewma", weight, 0.0)
    source = "exact marginal facts (REPRO)"
    lags = np.array([1, window // 4, window // 2])
    falls = {"moving mean": 1 - lags / window, "EWMA": (1 - weight) ** lags}
    for name, tracker in (("moving mean", mean), ("EWMA", ewma)):
        path = tracker.path(normals(0))[500:]
        spaced = 10 * window
        ours = Average.of(path[::spaced] ** 2)
        published(f"N Var({name}), N={window}", source, 1.0, window * ours.value, window * ours.allowed)
        for lag, fall in zip(lags, falls[name], strict=True):
            at = np.arange(0, len(path) - lag, spaced)
            pairs = Average.of(window * path[at] * path[at + lag])
            published(f"correlation of {name}, N={window}, lag {lag}", source, float(fall), pairs.value, pairs.allowed)
    beyond = Average.of((np.abs(windows(mean, parts=2)) > 3 / math.sqrt(window)).astype(float))
    published(f"P(moving mean beyond 3 SD), N={window}", source, 0.0026998, beyond.value, beyond.allowed)


@pytest.mark.parametrize("weight", [0.05, 0.2])
def test_the_exponentially_weighted_mean_square_has_the_mean_and_variance_of_its_law(weight: float) -> None:
    """E(v) = sigma^2 and Var(v) = 2 sigma^4 w/(2 - w) on normal values; a shift of d adds d^2."""
    source = "moments of the exponentially weighted mean square, J Qual Technol 1993;25:106-118 (MEM, REPRO)"
    spaced = int(20 / weight)
    for shift in (0.0, 0.5):
        v = Tracker("ewsd", weight, 1.0, (0.0,)).path(normals(0) + shift)[500::spaced] ** 2
        ours = Average.of(v)
        published(f"E(v), w={weight:g}, shift {shift:g}", source, 1 + shift**2, ours.value, ours.allowed)
    v = Tracker("ewsd", weight, 1.0, (0.0,)).path(normals(0))[500::spaced] ** 2
    ours = Average.of((v - 1) ** 2)
    published(f"Var(v), w={weight:g}", source, 2 * weight / (2 - weight), ours.value, ours.allowed)
