"""The population looks like a hospital's: spreads, skewness, correlations, ward differences."""

import numpy as np
import numpy.typing as npt
import pytest

from synthetic_streams import Laboratory
from synthetic_streams.analytes import ANALYTES, BY_KEY
from synthetic_streams.physiology import COLUMN, PHYSIOLOGY, correlated, correlation
from synthetic_streams.wards import WARDS

Floats = npt.NDArray[np.float64]


def reported(laboratory: Laboratory, key: str) -> Floats:
    """Reported values of an analyte on all its lines."""
    analyte = BY_KEY[key]
    return np.concatenate([laboratory.sample(analyte, line).value for line in analyte.lines])


def skewness(x: Floats) -> float:
    return float(((x - x.mean()) ** 3).mean() / x.std() ** 3)


@pytest.mark.parametrize(
    ("key", "mean", "sd"), [("sodium", (137, 140), (3.5, 4.1)), ("calcium", (2.25, 2.35), (0.12, 0.145))]
)
def test_spread_of_a_hospital_population(
    laboratory: Laboratory, key: str, mean: tuple[float, float], sd: tuple[float, float]
) -> None:
    value = reported(laboratory, key)
    assert mean[0] < value.mean() < mean[1]
    assert sd[0] < value.std() < sd[1]


def test_creatinine_alt_and_tsh_are_skewed_and_sodium_is_not(laboratory: Laboratory) -> None:
    assert all(skewness(reported(laboratory, key)) > 2 for key in ("creatinine", "alt", "tsh"))
    assert abs(skewness(reported(laboratory, "sodium"))) < 1


def test_alt_of_general_practice_is_nearly_lognormal(laboratory: Laboratory) -> None:
    sample = laboratory.sample(BY_KEY["alt"], "line-1")
    logs = np.log(sample.true_value[sample.ward == "GP"])
    assert abs(skewness(logs)) < 0.8 < skewness(np.exp(logs))


def test_daily_volumes_are_of_three_regimes(laboratory: Laboratory) -> None:
    per_day = {
        key: len(laboratory.sample(BY_KEY[key], line)) / laboratory.days
        for key, line in (("sodium", "line-1"), ("sodium", "line-2"), ("tsh", "immuno-1"), ("total_protein", "line-1"))
    }
    assert 340 < per_day["sodium"] < 400
    assert 72 < per_day["tsh"] < 80
    assert per_day["total_protein"] < 60


def test_correlations_are_a_possible_matrix_and_are_met() -> None:
    matrix = correlation()
    assert np.linalg.eigvalsh(matrix).min() > 0
    found = np.corrcoef(correlated(np.random.default_rng(1), 40_000).T)
    assert np.abs(found - matrix).max() < 0.025


def test_correlated_analytes_move_together_within_a_ward(laboratory: Laboratory) -> None:
    draws = laboratory.draws
    rows = np.flatnonzero(draws.ward == [ward.code for ward in WARDS].index("MED"))

    def r(one: str, other: str) -> float:
        values = [draws.true_values(BY_KEY[key], rows) for key in (one, other)]
        return float(np.corrcoef(*values)[0, 1])

    assert r("sodium", "chloride") > 0.4
    assert r("albumin", "total_protein") > 0.4
    assert r("albumin", "calcium") > 0.4
    assert 0.05 < r("haemoglobin", "mcv") < 0.5
    assert abs(r("sodium", "platelets")) < 0.1


def test_wards_differ_as_their_patients_do(laboratory: Laboratory) -> None:
    def median(key: str, code: str) -> float:
        analyte = BY_KEY[key]
        sample = laboratory.sample(analyte, analyte.lines[0])
        return float(np.median(sample.value[sample.ward == code]))

    assert median("creatinine", "DIAL") > 5 * median("creatinine", "GP")
    assert median("albumin", "ICU") < median("albumin", "MED") < median("albumin", "GP")
    assert median("haemoglobin", "ICU") < median("haemoglobin", "GP")


@pytest.mark.parametrize(
    ("key", "male_minus_female"), [("haemoglobin", 10.0), ("creatinine", 0.22), ("alt", 0.25), ("sodium", 0.0)]
)
def test_men_and_women_differ_as_the_physiology_says(
    laboratory: Laboratory, key: str, male_minus_female: float
) -> None:
    y, older, male = of_general_practice(laboratory, key)
    middle = np.abs(older) < 10
    found = y[middle & male].mean() - y[middle & ~male].mean()
    assert found == pytest.approx(male_minus_female, abs=4 * y.std() / np.sqrt(middle.sum() / 4))


@pytest.mark.parametrize("key", ["haemoglobin", "creatinine", "alt", "albumin", "sodium"])
def test_results_change_with_age_as_the_physiology_says(laboratory: Laboratory, key: str) -> None:
    y, older, male = of_general_practice(laboratory, key)
    for of_sex, per_decade in zip((~male, male), PHYSIOLOGY[key].per_decade, strict=True):
        slope = 10 * np.polyfit(older[of_sex], y[of_sex], 1)[0]
        error = 10 * y.std() / older.std() / np.sqrt(of_sex.sum())
        assert slope == pytest.approx(per_decade, abs=4 * error)


def of_general_practice(laboratory: Laboratory, key: str) -> tuple[Floats, Floats, npt.NDArray[np.bool_]]:
    """True values on the working scale, years above the mean age, and whether it is a man; each patient of the ward once."""
    draws = laboratory.draws
    ward = [ward.code for ward in WARDS].index("GP")
    _, first = np.unique(draws.patient, return_index=True)
    rows = first[draws.ward[first] == ward]
    who, value = draws.patient[rows], draws.true_values(BY_KEY[key], rows)
    older = draws.patients.age[who] - WARDS[ward].age[0]
    return np.log(value) if PHYSIOLOGY[key].logarithmic else value, older, draws.patients.male[who]


def test_every_analyte_has_a_physiology_for_every_ward() -> None:
    assert set(PHYSIOLOGY) == {analyte.key for analyte in ANALYTES} == set(COLUMN)
    assert {len(physiology.wards) for physiology in PHYSIOLOGY.values()} == {len(WARDS)}
    assert all(set(ward.asks) == set(COLUMN) for ward in WARDS)
