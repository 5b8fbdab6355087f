"""The patient-mix baseline pays on days and patients that did not fit it."""

import numpy as np
import pytest

from pbm.stages.surroundings import Surroundings
from synthetic_streams import Laboratory
from tests.evidence import sex_and_age
from tests.evidence.patient_mix import (
    ADMITTED,
    DAYS,
    LAB,
    LABORATORIES,
    OWN,
    SODIUM,
    WHOLE,
    WITHOUT,
    Judged,
    history,
    judged,
    reduction,
    variance_left,
)


def of_sodium(seeds: tuple[int, ...]) -> list[dict[tuple[str, str], Judged]]:
    found = []
    for seed in seeds:
        stretch = Surroundings.of(SODIUM, LAB, seed).stretch(history(Laboratory(DAYS, seed=seed), SODIUM))
        found.append(judged(stretch, ADMITTED[SODIUM], seed, (WITHOUT, WHOLE)))
    return found


def saved(found: list[dict[tuple[str, str], Judged]], row: str) -> float:
    return reduction([one[row, WITHOUT].needed for one in found], [one[row, WHOLE].needed for one in found])


@pytest.mark.slow
def test_on_sodium_a_quarter_of_tea_needs_clearly_fewer_results_with_a_baseline_at_no_more_false_alarms() -> None:
    found = of_sodium(LABORATORIES[:2])
    assert saved(found, OWN) > 0.2
    assert np.mean([one[OWN, WHOLE].false_alarms - one[OWN, WITHOUT].false_alarms for one in found]) < 1


@pytest.mark.full
def test_on_sodium_the_baseline_saves_a_third_of_the_results_that_a_quarter_of_tea_needs() -> None:
    assert saved(of_sodium(LABORATORIES), OWN) >= 1 / 3


def test_sex_and_age_take_variance_away_where_they_matter_and_none_where_they_do_not() -> None:
    laboratory = Laboratory(DAYS, seed=1)
    left = {}
    for name, plain in ADMITTED.items():
        stretch = Surroundings.of(name, LAB, 1).stretch(history(laboratory, name))
        without, by_ward, whole, crossed = variance_left(stretch, plain)
        left[name.analyte] = whole.values / by_ward.values
        assert by_ward.values < without.values
        assert 0.98 < crossed.values / whole.values < 1.001, "effects of age for each sex are not worth their place"
    assert left["haemoglobin"] < 0.95
    assert left["creatinine"] < 0.95
    assert 0.999 < left["sodium"] < 1.001


def test_on_real_results_sex_and_age_pay_in_patients_who_did_not_fit_and_added_effects_are_enough() -> None:
    for study in sex_and_age.studies():
        by_sex, added, each = sex_and_age.variance_left(study)
        assert added < by_sex < 1
        assert each > 0.995 * added, study.title
