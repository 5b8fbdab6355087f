"""Values adjusted for patient mix by a baseline that has not seen them: limits learned on the days that fitted it would be too narrow.

    z_i = y_i - b_(-f(i))(mix of i)

The days are dealt by weeks into a few folds, and each fold is adjusted by the baseline fitted on the others. A baseline follows its own
days' patients: where an hour of the week holds sixty results in training, its effect carries a sixtieth of their variance, which is taken
out of these days and put into later ones. A mean of twenty results feels that.

Source: cross-fitting as in "Cross-validatory choice and assessment of statistical predictions", Journal of the Royal Statistical Society B
1974;36:111-147.
"""

import numpy as np

from pbm.methods.baseline import Mix, fit_baseline
from pbm.methods.jit import Floats, Integers

FOLDS = 4
WEEK = 7


def cross_fitted(y: Floats, mix: Mix, days: Integers) -> Floats:
    """Adjusted values, shape (n,).

    Parameters
    ----------
    y : (n,)
        Admitted and transformed values; not a number where dropped.
    mix
        Who each came from.
    days : (n,)
        Local day of each, not decreasing; less than two weeks of them make one fold for each day.
    """
    since = days - days[0]
    fold = (since // WEEK if since[-1] >= FOLDS * WEEK else since) % FOLDS
    z = np.full(len(y), np.nan)
    for one in range(FOLDS):
        inside, others = fold == one, fold != one
        if inside.any() and np.isfinite(y[others]).any():
            z[inside] = y[inside] - fit_baseline(y[others], mix.rows(others)).all(mix.rows(inside))
    return z
