"""Textbook limits of an EWMA against the design table and the run lengths of the literature."""

import pytest

from pbm.methods.ewma_limits import ewma_run_length, textbook_factor
from tests.published.record import published

DESIGN = "Root-finding on the integral equation of Technometrics 1987;29:401-407 (check_values.md 1.4, REPRO)"
TABLE = "Technometrics 1990;32:1-12, Table 3, to more digits (check_values.md 1.1, REPRO)"
WANTED = (370.4, 500.0, 1000.0, 2000.0, 5000.0, 10000.0)
FACTORS = {
    0.02: (2.1354, 2.2780, 2.5854, 2.8632, 3.1920, 3.4174),
    0.05: (2.4901, 2.6151, 2.8838, 3.1285, 3.4225, 3.6273),
    0.10: (2.7015, 2.8143, 3.0586, 3.2834, 3.5568, 3.7491),
    0.25: (2.8980, 2.9981, 3.2171, 3.4216, 3.6738, 3.8533),
    0.50: (2.9778, 3.0711, 3.2767, 3.4708, 3.7124, 3.8858),
    1.00: (3.0000, 3.0902, 3.2905, 3.4808, 3.7190, 3.8906),
}


@pytest.mark.parametrize("weight", FACTORS)
def test_the_factor_for_a_wanted_run_length_is_that_of_the_design_table(weight: float) -> None:
    for wanted, factor in zip(WANTED, FACTORS[weight], strict=True):
        published(f"L for an ARL of {wanted:g}, weight {weight}", DESIGN, factor, textbook_factor(weight, wanted), 2e-4)


@pytest.mark.parametrize(
    ("weight", "factor", "length"),
    [(0.05, 2.615, 499.933), (0.1, 2.814, 499.580), (0.25, 3.0, 502.90), (0.75, 3.087, 499.252)],
)
def test_the_run_length_in_control_is_that_of_the_table(weight: float, factor: float, length: float) -> None:
    published(
        f"ARL in control, weight {weight}, L={factor}", TABLE, length, ewma_run_length(weight, factor), 1e-4 * length
    )


def test_small_weights_and_endless_run_lengths_have_an_answer() -> None:
    assert textbook_factor(0.002, 500.0) == textbook_factor(0.01, 500.0)
    assert textbook_factor(0.5, 1e9) == 5.0
