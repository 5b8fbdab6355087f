"""Spellings of a unit: its own, those given, and those that mean the same in UCUM; never those of another unit."""

import pytest

from pbm.records.laboratory import Analyte
from pbm.records.quantities import AllowableError, AnalyticSd


def analyte(unit: str, *others: str) -> Analyte:
    return Analyte(
        unit=unit,
        unit_names=others,
        step=1,
        allowable_error=AllowableError(percent=10),
        analytic_sd=AnalyticSd(absolute=1),
    )


def test_the_unit_comes_first_and_each_spelling_once() -> None:
    assert analyte("mmol/L", "mEq/L", "mmol/L").known_units() == ("mmol/L", "mEq/L", "mmol/l", "mEq/l")


def test_the_micro_sign_and_the_greek_letter_are_one_unit() -> None:
    assert "\u03bcmol/L" in analyte("\u00b5mol/L").known_units()
    assert "\u00b5mol/L" in analyte("umol/L", "\u03bcmol/L").known_units()


@pytest.mark.parametrize(
    ("unit", "same"),
    [
        ("mmol/L", "mmol/l"),
        ("umol/L", "\u00b5mol/L"),
        ("umol/L", "\u03bcmol/l"),
        ("10*9/L", "10^9/L"),
        ("10^3/uL", "10*3/\u00b5L"),
        ("mIU/L", "m[IU]/L"),
        ("m[iU]/L", "mIU/l"),
        ("u[IU]/mL", "\u00b5IU/mL"),
        ("mL/min", "ml/min"),
        ("ug/dL", "\u00b5g/dl"),
        ("um", "\u00b5m"),
    ],
)
def test_what_means_the_same_is_known(unit: str, same: str) -> None:
    assert same in analyte(unit).known_units()
    assert unit in analyte(same).known_units()


@pytest.mark.parametrize(
    ("unit", "other"),
    [
        ("mmol/L", "umol/L"),
        ("mmol/L", "Mmol/L"),
        ("U/L", "IU/L"),
        ("U/L", "u/L"),
        ("mU/L", "mIU/L"),
        ("mol/L", "moL/L"),
        ("mEq/L", "mmol/L"),
        ("10*9/L", "10*6/L"),
        ("g/L", "g/dL"),
        ("lb", "Lb"),
        ("m", "M"),
        ("mm[Hg]", "Mm[Hg]"),
    ],
)
def test_another_unit_is_not(unit: str, other: str) -> None:
    assert other not in analyte(unit).known_units()
    assert unit not in analyte(other).known_units()
