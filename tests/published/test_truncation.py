"""Truncation and winsorizing against closed forms: what `Preparation` admits of normal and lognormal results, and how far it then moves.

The results are quadrature nodes with weights, so that nothing is left to chance.
"""

import math

import numpy as np
import pytest
from scipy.stats import truncnorm

from pbm.methods.chain import Preparation
from tests.published.record import published
from tests.published.simulation import Moments, moments, weighted_grid
from tests.published.values import lines
from tests.published.values import truncation as values

STEP = 1e-3


def of_normal(preparation: Preparation, centre: float = 0.0, sd: float = 1.0) -> Moments:
    """Moments of what is admitted of normal results."""
    cuts = tuple(limit for limit in (preparation.low, preparation.high) if math.isfinite(limit))
    return moments(preparation, *weighted_grid(centre, sd, cuts))


def slope(preparation: Preparation) -> float:
    """Movement of the mean for a unit of shift, around no shift."""
    return (of_normal(preparation, STEP).mean - of_normal(preparation, -STEP).mean) / (2 * STEP)


def test_a_truncated_mean_moves_by_the_ratio_of_the_variances() -> None:
    """Share accepted, and d(mean)/d(shift) = Var(accepted)/sigma^2, for limits at .5 to 4 SD. REPRO."""
    for limit, truncated, _ in lines(values.SYMMETRIC):
        preparation = Preparation(-float(limit), float(limit))
        ours, moved = of_normal(preparation), slope(preparation)
        share, ratio, efficiency = truncated.split()
        published(f"share within +-{limit} SD", values.NORMAL_SOURCE, share, ours.share, 5e-7)
        published(f"variance within +-{limit} SD", values.NORMAL_SOURCE, ratio, ours.variance, 5e-7)
        published(f"slope of the mean within +-{limit} SD", values.NORMAL_SOURCE, ratio, moved, 1e-6)
        published(
            f"efficiency of the mean within +-{limit} SD", values.NORMAL_SOURCE, efficiency, ours.share * moved, 1e-6
        )


def test_a_winsorized_mean_moves_by_the_share_within_the_limits() -> None:
    """Variance, d(mean)/d(shift) = share within, and efficiency for results set to the limits. REPRO."""
    for limit, _, winsorized in lines(values.SYMMETRIC):
        preparation = Preparation(-float(limit), float(limit), winsorize=True)
        ours, moved = of_normal(preparation), slope(preparation)
        share, variance, efficiency = winsorized.split()
        assert ours.share == pytest.approx(1.0, abs=1e-12)
        published(f"winsorized at +-{limit} SD: slope of the mean", values.NORMAL_SOURCE, share, moved, 1e-6)
        published(f"winsorized at +-{limit} SD: variance", values.NORMAL_SOURCE, variance, ours.variance, 5e-7)
        gained = moved**2 / ours.variance
        published(f"winsorized at +-{limit} SD: efficiency", values.NORMAL_SOURCE, efficiency, gained, 1e-6)


def test_the_mean_of_accepted_results_after_a_shift() -> None:
    """Finite shifts, fixed limits. REPRO."""
    for limit, figures in lines(values.SHIFTED):
        preparation = Preparation(-float(limit), float(limit))
        for shift, figure in zip(values.SHIFTED_SHIFTS, figures.split(), strict=True):
            ours = of_normal(preparation, shift).mean
            published(
                f"mean within +-{limit} SD after a shift of {shift:g} SD", values.NORMAL_SOURCE, figure, ours, 1e-6
            )
    limit, figures = lines(values.SHIFTED_SHARE)[0]
    for shift, figure in zip(values.SHIFTED_SHIFTS, figures.split(), strict=True):
        ours = of_normal(Preparation(-float(limit), float(limit)), shift).share
        published(f"share within +-{limit} SD after a shift of {shift:g} SD", values.NORMAL_SOURCE, figure, ours, 1e-6)


def test_one_sided_and_asymmetric_limits() -> None:
    """Limits that are not symmetric, and sodium-like results. REPRO."""
    for low, high, centre, sd, *figures in lines(values.ONE_SIDED):
        ours = of_normal(Preparation(float(low), float(high)), float(centre), float(sd))
        for name, figure, got in zip(("share", "mean", "variance"), figures, ours, strict=True):
            if figure != "-":
                quantity = f"{name} of N({centre}, {sd}) within [{low}, {high}]"
                published(quantity, values.NORMAL_SOURCE, figure, got, 1e-6)


def test_truncated_moments_agree_with_scipy() -> None:
    """Mean and variance of accepted results. scipy.stats.truncnorm, tolerance 1e-10."""
    for low, high, centre, sd in ((-1.5, 0.7, 0.0, 1.0), (136.0, 148.0, 141.0, 3.5), (-0.2, 3.0, 1.0, 0.5)):
        expected = truncnorm((low - centre) / sd, (high - centre) / sd, loc=centre, scale=sd)
        ours = of_normal(Preparation(low, high), centre, sd)
        where = f"of N({centre:g}, {sd:g}) within [{low:g}, {high:g}]"
        published(f"mean {where}", "scipy.stats.truncnorm", float(expected.mean()), ours.mean, 1e-10)
        published(f"variance {where}", "scipy.stats.truncnorm", float(expected.var()), ours.variance, 1e-10)


def of_lognormal(low: float, high: float, log_mean: float, log_sd: float) -> Moments:
    """Moments of what is admitted of lognormal results."""
    cuts = tuple(math.log(limit) for limit in (low, high) if 0 < limit < math.inf)
    y, weight = weighted_grid(log_mean, log_sd, cuts)
    return moments(Preparation(low if low > 0 else -math.inf, high), np.exp(y), weight)


def test_truncated_lognormal_results_and_a_proportional_error() -> None:
    """Share, mean, variance, and the mean after an error of +10 % with the limits left where they are. REPRO."""
    for low, high, log_mean, log_sd, *figures in lines(values.LOGNORMAL):
        centre = math.log(1.5) if log_mean == "ln 1.5" else float(log_mean)
        ours = of_lognormal(float(low), float(high), centre, float(log_sd))
        after = of_lognormal(float(low), float(high), centre + math.log(1.1), float(log_sd))
        found = (*ours, after.mean, (after.mean / ours.mean - 1) / 0.1)
        names = ("share", "mean", "variance", "mean after +10 %", "relative gain / .10")
        for name, figure, got in zip(names, figures, found, strict=True):
            quantity = f"{name}: lognormal({log_mean}, {log_sd}) within [{low}, {high}]"
            published(quantity, values.LOGNORMAL_SOURCE, f"{figure}.000000" if figure == "1" else figure, got, 1e-6)
