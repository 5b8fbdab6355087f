"""Values adjusted by a baseline that has not seen them: fold by fold as by hand, and as wide as on later days."""

import numpy as np

from pbm.methods.baseline import Mix, fit_baseline
from pbm.methods.cross_fit import cross_fitted
from pbm.methods.seeds import child

PER_DAY = 150


def mix_of(days: np.ndarray) -> Mix:
    hour = (days % 7) * 24 + np.arange(len(days)) % PER_DAY * 24 // PER_DAY
    return Mix.of(np.array(["ED", "GP"])[np.arange(len(days)) % 2], hour)


def test_each_fold_is_adjusted_by_what_was_fitted_on_the_others() -> None:
    days = np.repeat(np.arange(20_000, 20_056), PER_DAY)
    mix, y = mix_of(days), child(1, "folds").normal(5, 1, len(days))
    y[7] = np.nan
    found = cross_fitted(y, mix, days)
    fold = (days - 20_000) // 7 % 4
    for one in range(4):
        fitted = fit_baseline(y[fold != one], mix.rows(fold != one))
        np.testing.assert_array_equal(found[fold == one], y[fold == one] - fitted.all(mix.rows(fold == one)))
    assert np.isnan(found[7]) and np.isfinite(found).sum() == len(y) - 1


def test_means_spread_as_on_later_days_where_the_hours_carry_only_noise_and_a_few_that_count() -> None:
    """By the baseline that was fitted on them they spread less, and limits learned there would be too narrow."""

    def spread(z: np.ndarray) -> float:
        return float(z.reshape(-1, 10).mean(axis=1).var())

    inside, across, later = [], [], []
    for seed in range(6):
        days = np.repeat(np.arange(112), PER_DAY)
        mix, random = mix_of(days), child(seed, "spread")
        effect = np.where(mix.hour % 24 < 6, random.normal(0, 0.6, 168)[mix.hour], 0.0)
        y, training = random.normal(0, 1, len(days)) + effect, days < 56
        fitted = fit_baseline(y[training], mix.rows(training))
        z = y - fitted.all(mix)
        inside.append(spread(z[training]))
        across.append(spread(cross_fitted(y[training], mix.rows(training), days[training])))
        later.append(spread(z[~training]))
    assert np.mean(inside) < 0.97 * np.mean(later)
    assert abs(np.mean(across) / np.mean(later) - 1) < 0.04


def test_a_history_of_days_rather_than_weeks_is_dealt_by_days() -> None:
    days = np.repeat(np.arange(10), PER_DAY)
    y = child(3, "short").normal(0, 1, len(days))
    found = cross_fitted(y, mix_of(days), days)
    assert np.isfinite(found).all()
