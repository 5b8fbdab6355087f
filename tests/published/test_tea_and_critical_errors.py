"""Chance that an error exceeds TEa, critical errors, and "whichever is greater" limits, against independent figures."""

import numpy as np
from scipy.optimize import brentq

from pbm.methods.unreliable import ErrorModel, chance_beyond, chance_unreliable
from tests.published.record import published
from tests.published.values import lines
from tests.published.values import unreliable as values


def beyond(sigma: float, shift: float, multiple: float = 1.0) -> float:
    """P(|error| > TEa) with TEa = sigma SD."""
    return float(chance_beyond(np.array(sigma), np.array(shift), np.array(multiple)))


def test_chance_of_an_error_beyond_tea_by_sigma_and_shift() -> None:
    """P(|error| > TEa) for sigma 2 to 6 at shifts of 0 to 4 SD. REPRO."""
    for sigma, figures in lines(values.BEYOND):
        for shift, figure in zip(values.SHIFTS, figures.split(), strict=True):
            ours = beyond(float(sigma), shift)
            published(f"P(beyond TEa): sigma {sigma}, shift {shift:g} SD", values.SOURCE, figure, ours, 0.0)


def test_unreliable_is_what_the_fault_adds_to_the_in_control_rate() -> None:
    """p(x, f) = P(beyond TEa under the fault) - P(beyond TEa in control); .0226868 at sigma 4, shift 2. REPRO."""
    ours = float(chance_unreliable(np.array(4.0), np.array(2.0), np.array(1.0)))
    published("p: sigma 4, shift 2 SD", values.SOURCE, ".0226868", ours, 0.0)


def test_critical_systematic_error_counts_both_tails() -> None:
    """Shift at which 5 % of results exceed TEa: sigma - 1.6449 from 3.5 on, less below (.2038 at sigma 2, not .35). REPRO."""
    for sigma, figure in lines(values.CRITICAL_SHIFT):
        ours = float(brentq(lambda shift, s=float(sigma): beyond(s, shift) - 0.05, 0.0, 10.0, xtol=1e-12))
        published(f"critical systematic error: sigma {sigma}", values.SOURCE, figure, ours, 0.0)


def test_critical_random_error_is_sigma_over_1_96() -> None:
    """Multiple of the SD at which 5 % of results exceed TEa. REPRO, with 1.96 for 1.959964 (2e-5 allowed)."""
    for sigma, figure in lines(values.CRITICAL_MULTIPLE):
        ours = float(brentq(lambda multiple, s=float(sigma): beyond(s, 0.0, multiple) - 0.05, 1.0, 10.0, xtol=1e-12))
        published(f"critical random error: sigma {sigma}", values.SOURCE, figure, ours, 2e-5 * float(figure))


def test_tea_is_the_greater_of_both_limits() -> None:
    """42 CFR 493.931 (limits MEM): ALT 15 % or 6 U/L, glucose 8 % or 6 mg/dL, creatinine 10 % or 0.2 mg/dL; arithmetic REPRO."""
    source = "42 CFR 493.931 (limits from memory), arithmetic"
    for analyte, percent, absolute, x, figure in (
        ("ALT", 15.0, 6.0, 22.0, "6.0"),
        ("ALT at the cross-over", 15.0, 6.0, 40.0, "6.0"),
        ("ALT", 15.0, 6.0, 100.0, "15.0"),
        ("glucose at the cross-over", 8.0, 6.0, 75.0, "6.0"),
        ("creatinine at the cross-over", 10.0, 0.2, 2.0, "0.20"),
        ("thyrotropin at the cross-over", 20.0, 0.2, 1.0, "0.20"),
    ):
        ours = float(ErrorModel(absolute, percent, 1.0, 0.0).tea(np.array([x]))[0])
        published(f"TEa of {analyte}, result {x:g}", source, float(figure), ours, 1e-12)
