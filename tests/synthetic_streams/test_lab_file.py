"""`lab.toml` is one that pbm reads, and says what the laboratory really does."""

import tomllib

import pytest

from pbm.records.laboratory import Lab
from synthetic_streams.analytes import ANALYTES, BY_KEY
from synthetic_streams.lab_file import lab_toml
from synthetic_streams.rows import COLUMNS


@pytest.fixture(scope="module")
def lab() -> Lab:
    return Lab.model_validate(tomllib.loads(lab_toml()))


def test_pbm_takes_it_with_all_analytes(lab: Lab) -> None:
    assert set(lab.analytes) == set(BY_KEY)
    assert lab.laboratory.timezone == "Atlantic/Azores"


@pytest.mark.parametrize(
    ("key", "absolute", "percent"),
    [
        ("sodium", 4, None),
        ("potassium", 0.3, None),
        ("chloride", None, 5),
        ("calcium", 0.25, None),
        ("albumin", None, 8),
        ("total_protein", None, 8),
        ("creatinine", 18, 10),
        ("glucose", 0.33, 8),
        ("alt", 6, 15),
        ("tsh", 0.2, 20),
        ("haemoglobin", None, 4),
        ("mcv", None, 5),
        ("platelets", None, 25),
    ],
)
def test_tea_is_that_of_the_regulation(lab: Lab, key: str, absolute: float | None, percent: float | None) -> None:
    tea = lab.analytes[key].allowable_error
    assert (tea.absolute, tea.percent) == (absolute, percent)


def test_every_column_it_names_is_in_the_export(lab: Lab) -> None:
    named = {getattr(lab.extract, role) for role in ("time", "analyte", "value", "analyser", "unit", "specimen", "ward",
                                                     "sex", "age", "lot", "patient", "kind")}  # fmt: skip
    assert named == set(COLUMNS)


def test_every_spelling_of_the_export_is_mapped(lab: Lab) -> None:
    spelled = {text: a.key for a in ANALYTES for text in (a.code, *a.spellings)}
    assert spelled.items() <= lab.spellings().items()


def test_step_analytic_sd_and_controls_are_those_of_the_analysers(lab: Lab) -> None:
    for analyte in ANALYTES:
        told = lab.analytes[analyte.key]
        assert (told.step, told.unit) == (analyte.step, analyte.unit)
        assert (told.analytic_sd.absolute, told.analytic_sd.cv_percent) == (analyte.sd_absolute, analyte.cv_percent)
        controls = lab.controls_of(analyte.key)
        assert tuple(level.mean for level in controls.levels) == analyte.levels
        assert controls.times == ("06:00", "14:00", "22:00")
        assert controls.rules == ("1-3s", "2-2s", "R-4s")
