"""Spellings of a unit: its own, those given, and either of the two signs that look like a micro."""

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
    assert analyte("mmol/L", "mEq/L", "mmol/L").known_units() == ("mmol/L", "mEq/L")


def test_the_micro_sign_and_the_greek_letter_are_one_unit() -> None:
    assert "\u03bcmol/L" in analyte("\u00b5mol/L").known_units()
    assert "\u00b5mol/L" in analyte("umol/L", "\u03bcmol/L").known_units()
