"""Patient mix: the expected value by ward, hour of the week, sex and age band, which is taken away before the statistic.

    z = y - b,   b = effect of the ward + of the hour + of the sex + of the age band

Sex and age take part where the history gives them and each explains at least a thousandth of the variance: what is not needed about a
patient is not asked for. The additive effects are fitted by least squares, and each is shrunk towards 0 where its group is thin: an effect
with sampling variance s^2 / n among effects with variance t^2 is multiplied by t^2 / (t^2 + s^2 / n). A group never seen in training has
effect 0. The table is part of the plan and is never refitted silently.

Source of the adjustment: "Regression-adjusted real-time quality control", Clinical Chemistry 2021;67:1342-50 (from memory). Source of the
shrinkage: "Data analysis using Stein's estimator and its generalizations", Journal of the American Statistical Association 1975;70:311-319.
"""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from pbm.methods.jit import Floats, Integers
from pbm.methods.significant import significant

HOURS = 168
SIGNIFICANT = 4
RIDGE = 1e-9
LEAST_SHARE = 0.001  # of the variance, for sex or age to take part

Effects = tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True)
class Groups:
    """A property of the patients that takes a few values, such as their sex.

    Attributes
    ----------
    names
        The values that it takes; "" where it is not known.
    code : (n,)
        Index into `names` of each result.
    """

    names: tuple[str, ...]
    code: Integers

    @classmethod
    def of(cls, texts: Any) -> "Groups":
        """From the value of each result, shape (n,)."""
        listed = texts.tolist()
        number = {name: code for code, name in enumerate(sorted(set(listed)))}
        return cls(tuple(number), np.fromiter(map(number.__getitem__, listed), np.int64, len(listed)))

    def rows(self, chosen: Any) -> "Groups":
        """Some of the results (slice, mask or index)."""
        return Groups(self.names, self.code[chosen])

    def effect(self, effects: Effects) -> Floats:
        """The effect of each result's group, shape (n,)."""
        known = dict(effects)
        return np.array([known.get(name, 0.0) for name in self.names])[self.code]


@dataclass(frozen=True, slots=True)
class Mix:
    """Who each result came from, and when.

    Attributes
    ----------
    wards
        Names of the wards.
    ward, hour : (n,)
        Index into `wards`, and local hour of the week (0 = Monday 00:00 to 01:00), of each result.
    sex, age
        Sex and age band of each result's patient; None where nobody's is known.
    """

    wards: tuple[str, ...]
    ward: Integers
    hour: Integers
    sex: Groups | None = None
    age: Groups | None = None

    @classmethod
    def of(cls, wards: Any, hour: Integers, sex: Any = None, age: Any = None) -> "Mix":
        """From the ward names of the results, shape (n,), their hours of the week, and their patients' sex and age band, "" if unknown."""
        ward = Groups.of(wards)
        return cls(ward.names, ward.code, hour, _known(sex), _known(age))

    def rows(self, chosen: Any) -> "Mix":
        """Some of the results (slice, mask or index)."""
        sex, age = (None if one is None else one.rows(chosen) for one in (self.sex, self.age))
        return Mix(self.wards, self.ward[chosen], self.hour[chosen], sex, age)


def _known(texts: Any) -> Groups | None:
    groups = None if texts is None else Groups.of(texts)
    return groups if groups and any(groups.names) else None


@dataclass(frozen=True, slots=True)
class Baseline:
    """Effects of wards, of the 168 hours of the week, of the sexes and of the age bands, on the transformed scale.

    `sexes` and `ages` are empty where they take no part.
    """

    wards: Effects
    hours: tuple[float, ...]
    sexes: Effects = ()
    ages: Effects = ()

    def one(self, ward: str, hour: int, sex: str = "", age: str = "") -> float:
        """b for one result; the same sum of the same numbers in the same order as in `all`."""
        expected = dict(self.wards).get(ward, 0.0) + self.hours[hour]
        if self.sexes:
            expected += dict(self.sexes).get(sex, 0.0)
        if self.ages:
            expected += dict(self.ages).get(age, 0.0)
        return expected

    def all(self, mix: Mix) -> Floats:
        """b for each result, shape (n,)."""
        expected: Floats = Groups(mix.wards, mix.ward).effect(self.wards) + np.array(self.hours)[mix.hour]
        for effects, groups in ((self.sexes, mix.sex), (self.ages, mix.age)):
            if effects:
                expected += dict(effects).get("", 0.0) if groups is None else groups.effect(effects)
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
    whole = _fitted(y, mix)
    least = LEAST_SHARE * float(y.var())
    sex, age = _if_it_pays(mix.sex, whole.sexes, least), _if_it_pays(mix.age, whole.ages, least)
    return whole if sex is mix.sex and age is mix.age else _fitted(y, replace(mix, sex=sex, age=age))


def _if_it_pays(groups: Groups | None, effects: Effects, least: float) -> Groups | None:
    """The groups, unless the variance of their effects is less than the least."""
    return None if groups is None or groups.effect(effects).var() < least else groups


def _fitted(y: Floats, mix: Mix) -> Baseline:
    people = [groups for groups in (mix.sex, mix.age) if groups]
    codes = [mix.ward, mix.hour, *(groups.code for groups in people)]
    effects = shrunk_effects(y, codes, [len(mix.wards), HOURS, *(len(groups.names) for groups in people)])
    wards, hours, *of_people = effects
    named = iter(of_people)
    sexes, ages = (
        () if groups is None else tuple(zip(groups.names, next(named), strict=True)) for groups in (mix.sex, mix.age)
    )
    return Baseline(tuple(zip(mix.wards, wards, strict=True)), tuple(hours), sexes, ages)


def shrunk_effects(y: Floats, codes: list[Integers], sizes: list[int]) -> list[list[float]]:
    """Additive effects of several groupings of the same results, each effect shrunk by itself.

    Parameters
    ----------
    y : (n,)
        The results.
    codes : each (n,)
        Group of each result in each grouping.
    sizes
        How many groups each grouping has.
    """
    level = y.mean()
    counts = [np.bincount(code, minlength=size).astype(np.float64) for code, size in zip(codes, sizes, strict=True)]
    fitted = _least_squares(y - level, codes, counts)
    centred = [_centred(effect, count) for effect, count in zip(fitted, counts, strict=True)]
    left = y - level - sum(effect[code] for effect, code in zip(centred, codes, strict=True))
    return [_shrunk(effect, count, float(left.var())) for effect, count in zip(centred, counts, strict=True)]


def _least_squares(y: Floats, codes: list[Integers], counts: list[Floats]) -> list[Floats]:
    """Effects of each grouping by least squares.

    The normal equations are singular: a constant may move between groupings, and more where wards never share an hour. A ridge too small
    to be seen in the effects picks their smallest solution.
    """
    sizes = [len(count) for count in counts]
    rows = [
        [np.diag(counts[i]) if i == j else _together(codes[i], codes[j], sizes[i], sizes[j]) for j in range(len(sizes))]
        for i in range(len(sizes))
    ]
    normal = np.block(rows)
    normal += RIDGE * len(y) * np.eye(len(normal))
    totals = [np.bincount(code, weights=y, minlength=size) for code, size in zip(codes, sizes, strict=True)]
    found = np.linalg.solve(normal, np.concatenate(totals)).astype(np.float64)
    return np.split(found, np.cumsum(sizes)[:-1])


def _together(one: Integers, other: Integers, rows: int, columns: int) -> Floats:
    """Number of results in each pair of groups of two groupings, shape (rows, columns)."""
    return np.bincount(one * columns + other, minlength=rows * columns).astype(np.float64).reshape(rows, columns)


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
    return [significant(effect, SIGNIFICANT) for effect in kept]
