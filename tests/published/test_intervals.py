"""Exact intervals for counts and shares against print."""

import math

from pbm.methods.intervals import binomial_interval, poisson_interval, rate_ratio, rates_differ
from tests.published.record import published
from tests.published.values import intervals as values
from tests.published.values import lines


def test_exact_binomial_intervals() -> None:
    """Clopper-Pearson intervals. Examples READ or MEM as the source says, REPRO."""
    for successes, trials, level, *ends, source in lines(values.BINOMIAL):
        ours = binomial_interval(int(successes), int(trials), float(level))
        for end, figure, got in zip(("low", "high"), ends, ours, strict=True):
            printed = 0.0 if figure == "0" else figure
            published(f"{successes} of {trials}, {level} interval, {end}", source, printed, got, 5e-7)


def test_exact_poisson_intervals() -> None:
    """Intervals of the expectation of a count. REPRO."""
    for count, *ends in lines(values.POISSON):
        ours = poisson_interval(int(count), 0.95)
        for end, figure, got in zip(("low", "high"), ends, ours, strict=True):
            printed = 0.0 if figure == "0" else figure
            published(f"{count} events, .95 interval, {end}", values.GARWOOD, printed, got, 1e-6)


def test_the_rule_of_three() -> None:
    """One-sided 95 % upper limit for no event: 2.995732 = -ln .05. Closed form."""
    published("0 events, one-sided .95 upper limit", "-ln .05", -math.log(0.05), poisson_interval(0, 0.90)[1], 1e-9)


def test_exact_intervals_of_rates() -> None:
    """Events over a base of exposure. Calls and counts READ, intervals REPRO."""
    for events, base, rate, low, high, source in lines(values.RATES):
        found = (float(events), *poisson_interval(int(events), 0.95))
        for name, figure, got in zip(("rate", "low", "high"), (rate, low, high), found, strict=True):
            published(f"{events} events on {base}: {name}", source, figure, got / float(base), 0.0)


def test_the_exact_comparison_of_two_rates() -> None:
    """11 events on 800 against 21 on 3011. Call READ in the reference manual of the R base library (`poisson.test`), results REPRO."""
    source = "R base library, poisson.test example (READ), REPRO"
    found = rate_ratio(11, 800, 21, 3011, 0.95)
    for name, printed, ours in zip(("ratio", "low", "high"), ("1.971488", ".858426", "4.277266"), found, strict=True):
        published(f"two rates, {name}", source, printed, ours, 5e-7)
    published("two rates, p", source, ".0796686", rates_differ(11, 800, 21, 3011), 5e-8)
