"""`pbm appraise` on files against the closed forms of unreliable results: independent results, constant p, a schedule every M results.

With events every M results that detect with chance P, and an onset anywhere in a bracket,

    E(N) = (M + 1) / 2 + M (1 - P) / P,   E(Nuf) = p (1 - P) E(N),   E(Nuc) = p [P (M + 1) / 2 + (1 - P) M]

The figures of the published model and of its combination with an EWMA are those of check_values.md 4.2 and 4.5 (REPRO).
"""

from datetime import timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import binom, norm

from tests.commands.written_laboratory import FIRST, WrittenLaboratory, appraised

DAYS = 16
LINES = [f"line-{number}" for number in range(1, 9)]
SHIFTED_FAR = """
[alarms]
response_lag = "0 results"
[controls]
every = "{spacing} results"
rules = ["1-3s"]
[analytes.sodium]
unit = "mmol/L"
step = 0.001
allowable_error = {{ absolute = 3.0 }}
analytic_sd = {{ absolute = 0.25 }}
controls.levels = [ {{ mean = 140, sd = {sd!r} }} ]
faults = [ {{ sizes = [12.0], unit = "unit", signs = "up" }} ]
"""


def control_sd(power: float) -> float:
    """SD of a control material at which a shift of 12 is rejected by 1-3s with this chance."""
    if power == 1:
        return 0.1
    return 12 / float(brentq(lambda z: norm.cdf(z - 3) + norm.cdf(-z - 3) - power, 0, 40))


def holds(figure: dict[str, float], expected: float) -> bool:
    """Whether the interval of a figure holds a value, but for what is written of it (seven digits)."""
    rounding = 1e-6 * abs(expected)
    return figure["low"] - rounding <= expected <= figure["high"] + rounding


def enough(figures: list[dict[str, float]], expected: float) -> bool:
    """Whether as many intervals of 90 % hold a value as fewer than one set of intervals in two hundred would not."""
    held = sum(holds(figure, expected) for figure in figures)
    return held > binom.ppf(0.005, len(figures), 0.9) - 1


@pytest.mark.parametrize(
    ("spacing", "power", "per_day", "lines", "total", "final", "correctable"),
    [
        (100, 0.5, 900, 8, 150.5, 75.25, 75.25),
        (100, 0.9, 500, 8, 61.6111, 6.1611, 55.45),
        (1, 0.5, 60, 1, 2.0, 1.0, 1.0),
        (100, 1.0, 500, 8, 50.5, 0.0, 50.5),
        pytest.param(200, 0.05, 8600, 4, 3900.5, 3705.475, 195.025, marks=pytest.mark.slow),
    ],
)
def test_the_schedule_alone_gives_the_closed_forms_within_its_intervals(
    tmp_path: Path, spacing: int, power: float, per_day: int, lines: int, total: float, final: float, correctable: float
) -> None:
    random, names = np.random.default_rng(42), LINES[:lines]
    results = {line: random.normal(140, 4, DAYS * per_day) for line in names}
    lab = SHIFTED_FAR.format(spacing=spacing, sd=control_sd(power))
    made = WrittenLaboratory.make(tmp_path / "lab", lab, results, per_day)
    made.plan(names, held_out_from=FIRST + timedelta(1))
    streams = appraised(made.folder)["streams"]
    faults = [stream["judged"]["faults"][0] for stream in streams]
    assert all(stream["horizon_days"] == 7.0 for stream in streams)
    assert all(fault["never"]["schedule"]["value"] < 1e-4 for fault in faults)
    assert all(fault["by_first_event"]["schedule"]["value"] == pytest.approx(power, abs=1e-6) for fault in faults)
    assert enough([fault["until"]["schedule"]["mean"] for fault in faults], total)
    assert enough([fault["unreliable"]["alone"] for fault in faults], total), "p is 1: a shift of four TEa"
    assert enough([fault["unreliable_final"]["alone"] for fault in faults], final)
    assert enough([fault["unreliable_correctable"]["alone"] for fault in faults], correctable)
    widths = [fault["unreliable"]["alone"]["high"] - fault["unreliable"]["alone"]["low"] for fault in faults]
    assert max(widths) < 0.05 * total


TOGETHER = """
[alarms]
response_lag = "0 results"
[controls]
every = "100 results"
rules = ["1-3s"]
[analytes.sodium]
unit = "mmol/L"
step = 0.001
allowable_error = { absolute = 4.0 }
analytic_sd = { absolute = 1.0 }
controls.levels = [ { mean = 120, sd = 1.0 }, { mean = 150, sd = 1.0 } ]
faults = [ { sizes = [2.0], unit = "SD" } ]
"""
HALF = 2.615 * 4 * (0.05 / 1.95) ** 0.5
EWMA: dict[str, Any] = {
    "statistic": "ewma",
    "weight": 0.05,
    "centre": 140.0,
    "limits": {"low": 140 - HALF, "high": 140 + HALF},
    # The published monitor is armed at the onset. Re-armed as soon as it is inside again, this one nearly always is.
    "rearm": 0.999,
    "budget_per_day": 3.0,
    "spread": 4.0,
}
UNRELIABLE = 0.0226868  # p at a shift of 2 SD with TEa = 4 SD
CAUGHT = 0.29214  # chance that 1-3s on two controls finds a shift of 2 SD (check_values.md 3.1)


def survival(start: str, weight: float = 0.05, factor: float = 2.615, shift: float = 0.5) -> np.ndarray:
    """P(T > n) of an EWMA under a shift, n = 0, 1, ..., from its centre or as it stands when it has been running inside its limits."""
    sd = (weight / (2 - weight)) ** 0.5
    node, share = np.polynomial.legendre.leggauss(201)
    y, step = factor * sd * node, factor * sd * share
    moved = (y[:, None] - (1 - weight) * y[None, :] - weight * shift) / weight
    kernel = norm.pdf(moved) / weight * step[None, :]
    density = norm.pdf((y - weight * shift) / weight) / weight if start == "centre" else norm.pdf(y / sd) / sd
    alive = [1.0]
    if start == "running":
        density = kernel @ (density / (density @ step))
    for _ in range(1500):
        alive.append(float(density @ step))
        density = kernel @ density
    return np.array(alive)


def together(alive: np.ndarray, spacing: int = 100, power: float = CAUGHT) -> tuple[float, float]:
    """E(N) and E(N final) of controls and a monitor (check_values.md 4.5)."""
    total = final = 0.0
    places = np.arange(len(alive) - 1)
    for first in range(1, spacing + 1):
        events = np.where(places < first, 0, (places - first) // spacing + 1)
        total += float((alive[:-1] * (1 - power) ** events).sum()) / spacing
        closed = first + spacing * np.arange((len(alive) - 1 - first) // spacing + 1)
        size = np.where(closed == first, first, spacing)
        final += float((size * alive[closed] * (1 - power) ** (1 + np.arange(len(closed)))).sum()) / spacing
    return total, final


def test_the_formula_with_a_monitor_gives_the_published_figures() -> None:
    """A monitor that starts at its centre; one that has been running is a little faster."""
    assert together(survival("centre")) == pytest.approx((27.196, 3.783), abs=2e-3)
    running = together(survival("running"))
    assert 25.9 < running[0] < 27.196 and 3.3 < running[1] < 3.9


def test_controls_and_an_ewma_together_give_the_published_gain_within_its_intervals(tmp_path: Path) -> None:
    """M = 100, 1-3s on two controls, error of 2 analytic SD, patients' SD of 4: 292.8 results until detection become 27.2.

    The published EWMA starts at its centre; here it has been running, so the formula is taken with its distribution then.
    """
    per_day, random, names = 1500, np.random.default_rng(43), LINES[:6]
    results = {line: random.normal(140, 4, DAYS * per_day) for line in names}
    made = WrittenLaboratory.make(tmp_path / "lab", TOGETHER, results, per_day)
    made.plan(names, EWMA, held_out_from=FIRST + timedelta(1))
    streams = appraised(made.folder)["streams"]
    faults = [fault for stream in streams for fault in stream["judged"]["faults"]]
    total, final = together(survival("running"))
    alone = [stream["judged"]["faults"][0] for stream in streams]  # both signs are the same to the controls
    assert enough([fault["until"]["schedule"]["mean"] for fault in alone], 292.802)
    assert enough([fault["unreliable"]["alone"] for fault in alone], UNRELIABLE * 292.802)
    assert enough([fault["unreliable_final"]["alone"] for fault in alone], UNRELIABLE * 207.263)
    both = [fault["until"]["both"]["mean"] for fault in faults]
    assert enough(both, total)
    assert enough([fault["unreliable"]["with_monitor"] for fault in faults], UNRELIABLE * total)
    assert enough([fault["unreliable_final"]["with_monitor"] for fault in faults], UNRELIABLE * final)
    assert np.mean([one["high"] - one["low"] for one in both]) < 5
    mean = float(np.mean([one["value"] for one in both]))
    assert mean == pytest.approx(27.196, rel=0.04), "the published figure itself, on average over the lines"
