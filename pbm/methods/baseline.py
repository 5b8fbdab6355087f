"""Patient mix: the expected value by ward and hour of the week, which is taken away before the statistic.

    z = y - b(ward, hour of week),   b = effect of the ward + effect of the hour

The additive effects are fitted by least squares, and shrunk towards 0 where a ward or an
hour is thin: an effect with sampling variance s^2 / n among effects with variance t^2 is multiplied by t^2 / (t^2 + s^2 / n). A ward
never seen in training has effect 0. The table is part of the plan and is never refitted silently.

Source of the adjustment: "Regression-adjusted real-time quality control", Clinical Chemistry 2021;67:1342-50 (from memory). Source of the
shrinkage: "Data analysis using Stein's estimator and its generalizations", Journal of the American Statistical Association 1975;70:311-319.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np

from pbm.methods.jit import Floats, Integers

HOURS = 168
SIGNIFICANT = 4
RIDGE = 1e-9


@dataclass(frozen=True, slots=True)
class Mix:
    """Who each result came from.

    Attributes
    ----------
    wards
        Names of the wards.
    ward, hour : (n,)
        Index into `wards`, and local hour of the week (0 = Monday 00:00 to 01:00), of each result.
    """

    wards: tuple[str, ...]
    ward: Integers
    hour: Integers

    @classmethod
    def of(cls, wards: Any, hour: Integers) -> "Mix":
        """From the ward names of the results, shape (n,), and their hours of the week."""
        names, codes = np.unique(wards.astype(str), return_inverse=True)
        return cls(tuple(names.tolist()), codes.astype(np.int64), hour)

    def rows(self, chosen: Any) -> "Mix":
        """Some of the results (slice, mask or index)."""
        return Mix(self.wards, self.ward[chosen], self.hour[chosen])


@dataclass(frozen=True, slots=True)
class Baseline:
    """Effects of wards and of the 168 hours of the week, on the transformed scale."""

    wards: tuple[tuple[str, float], ...]
    hours: tuple[float, ...]

    def one(self, ward: str, hour: int) -> float:
        """b for one result; the same sum of the same two numbers as in `all`."""
        return dict(self.wards).get(ward, 0.0) + self.hours[hour]

    def all(self, mix: Mix) -> Floats:
        """b for each result, shape (n,)."""
        effects = dict(self.wards)
        ward = np.array([effects.get(name, 0.0) for name in mix.wards])
        expected: Floats = ward[mix.ward] + np.array(self.hours)[mix.hour]
        return expected


def fit_baseline(y: Floats, mix: Mix) -> Baseline:
    """Fit the effects on admitted, transformed results.

    Parameters
    ----------
    y : (n,)
        Transformed results; not a number where not admitted.
    mix
        Of the same results.
    """
    taken = ~np.isnan(y)
    y, mix = y[taken], mix.rows(taken)
    level = y.mean()
    count, total = _by_ward_and_hour(np.ones_like(y), mix), _by_ward_and_hour(y - level, mix)
    ward, hour = _effects(total, count)
    ward, hour = _centred(ward, count.sum(axis=1)), _centred(hour, count.sum(axis=0))
    noise = float((y - level - ward[mix.ward] - hour[mix.hour]).var())
    wards = _shrunk(ward, count.sum(axis=1), noise)
    hours = _shrunk(hour, count.sum(axis=0), noise)
    return Baseline(tuple(zip(mix.wards, wards, strict=True)), tuple(hours))


def _by_ward_and_hour(amount: Floats, mix: Mix) -> Floats:
    """Sum of an amount over the results of each ward and hour, shape (wards, 168)."""
    cells = np.bincount(mix.ward * HOURS + mix.hour, weights=amount, minlength=len(mix.wards) * HOURS)
    return cells.astype(np.float64).reshape(-1, HOURS)


def _effects(total: Floats, count: Floats) -> tuple[Floats, Floats]:
    """Additive effects of wards and hours by least squares, from the total and count of each ward and hour.

    The normal equations are singular: a constant may move between wards and hours, and more where wards never share an hour. A ridge too
    small to be seen in the effects picks their smallest solution.
    """
    wards, hours = count.sum(axis=1), count.sum(axis=0)
    normal = np.block([[np.diag(wards), count], [count.T, np.diag(hours)]])
    normal += RIDGE * count.sum() * np.eye(len(normal))
    found = np.linalg.solve(normal, np.concatenate([total.sum(axis=1), total.sum(axis=0)])).astype(np.float64)
    return found[: len(wards)], found[len(wards) :]


def _centred(effects: Floats, counts: Floats) -> Floats:
    """Effects with mean 0 over the results, and 0 where there is none (the level itself belongs to the centre)."""
    centred: Floats = np.where(counts > 0, effects - np.average(effects, weights=counts), 0.0)
    return centred


def _shrunk(effects: Floats, counts: Floats, noise: float) -> list[float]:
    """Shrunk towards 0 by the share of sampling variance, and rounded as the plan stores them."""
    seen = counts > 0
    sampling = noise / np.maximum(counts, 1)
    between = max(float(np.average(effects**2 - sampling, weights=counts)), 0.0) if seen.any() else 0.0
    kept = np.where(seen, effects * between / (between + sampling) if between > 0 else 0.0, 0.0)
    return [float(f"{effect:.{SIGNIFICANT}g}") for effect in kept]
