"""Errors are written the same everywhere: kind, size with sign, unit, and course where they have one."""

from pbm.io.report import fault_words
from tests.io.report import sample
from tests.io.report.variants import judged_of

BY_LABEL = {one.label: one for one in judged_of(sample.CALCIUM).faults}


def test_an_error_is_told_with_its_course() -> None:
    told = {label: fault_words.fault_in_words(one, "mmol/L") for label, one in BY_LABEL.items()}
    assert told["shift -0.5 TEa"] == "shift −0.5 TEa"
    assert told["noise x2"] == "noise 2 times the analytic SD"
    assert told["drift +1 TEa over 200 results"] == "drift +1 TEa over 200 results"
    assert told["sporadic -1 TEa in 0.1 of results"] == "sporadic error −1 TEa in 10\u202f% of results"


def test_an_error_in_the_unit_of_the_analyte_says_so() -> None:
    given = BY_LABEL["shift +0.5 TEa"].model_copy(update={"unit": "unit"})
    assert fault_words.fault_in_words(given, "mmol/L") == "shift +0.5 mmol/L"


def test_the_size_at_the_median_result_stands_in_the_unit_of_the_analyte() -> None:
    assert fault_words.shift_in_words(BY_LABEL["shift +0.5 TEa"], "mmol/L") == "+0.125 mmol/L"
    assert fault_words.shift_in_words(BY_LABEL["noise x2"], "mmol/L") == ""


def test_errors_are_listed_with_both_signs_together() -> None:
    given = [BY_LABEL["shift -0.25 TEa"], BY_LABEL["shift +0.25 TEa"], BY_LABEL["shift +0.5 TEa"], BY_LABEL["noise x2"]]
    assert fault_words.listed(given, "mmol/L") == "shift ±0.25, +0.5 TEa; noise 2 times the analytic SD"
    assert fault_words.listed(given[:1], "mmol/L") == "shift −0.25 TEa"


def test_a_label_becomes_the_words_used_elsewhere() -> None:
    faults = judged_of(sample.CALCIUM).faults
    assert fault_words.named(faults, "noise x2", "mmol/L") == "noise 2 times the analytic SD"
    assert fault_words.named(faults, "something else", "mmol/L") == "something else"
