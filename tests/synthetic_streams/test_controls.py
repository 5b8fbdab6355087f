"""Control materials at the scheduled times, judged by the rules, with the SD that `lab.toml` states."""

from datetime import datetime

import numpy as np
import pytest

from synthetic_streams import Fault, Laboratory
from synthetic_streams.analytes import BY_KEY
from synthetic_streams.clock import SECOND, ZONE
from synthetic_streams.controls import accepted, control_sd, measure_controls

SODIUM = BY_KEY["sodium"]


@pytest.mark.parametrize(
    ("z", "passes"),
    [
        ((2.9, 0.0), True),
        ((3.1, 0.0), False),
        ((0.0, -3.1), False),
        ((2.1, 2.1), False),
        ((-2.1, -2.1), False),
        ((2.1, 1.9), True),
        ((2.2, -1.9), False),
        ((2.0, -1.9), True),
    ],
)
def test_an_event_is_judged_by_1_3s_2_2s_and_r_4s(z: tuple[float, float], passes: bool) -> None:
    assert accepted(np.array([z])).tolist() == [passes]


def test_both_levels_are_measured_three_times_a_day_and_a_rejected_event_once_more(laboratory: Laboratory) -> None:
    controls = measure_controls(laboratory, laboratory.sample(SODIUM, "line-1"), ())
    times = [datetime.fromtimestamp(t / SECOND, ZONE) for t in controls.time.tolist()]
    scheduled = np.array([at.minute < 20 for at in times])
    assert {at.hour for at in times} == {6, 14, 22}
    assert scheduled.sum() == 3 * 2 * laboratory.days
    assert (~scheduled).sum() == (~controls.accepted[scheduled]).sum()
    assert controls.level[scheduled].tolist() == [1, 2] * (3 * laboratory.days)


def test_control_results_have_the_stated_mean_and_sd(laboratory: Laboratory) -> None:
    ratios, shifts = [], []
    for key, line in (("sodium", "line-1"), ("calcium", "line-2"), ("tsh", "immuno-1"), ("haemoglobin", "haem-1")):
        analyte = BY_KEY[key]
        controls = measure_controls(laboratory, laboratory.sample(analyte, line), ())
        for level, mean in enumerate(analyte.levels, start=1):
            z = (controls.value[controls.level == level] - mean) / control_sd(analyte, mean)
            ratios.append(z.std())
            shifts.append(z.mean())
    assert np.mean(ratios) == pytest.approx(1, abs=0.08)
    assert np.abs(shifts).max() < 0.6


def test_a_fault_acts_on_controls_as_on_patients(laboratory: Laboratory) -> None:
    sample = laboratory.sample(SODIUM, "line-2")
    onset = int(sample.time[len(sample) // 2])
    fault = Fault("sodium", "line-2", onset, "shift", 1.0)
    healthy = measure_controls(laboratory, sample, ())
    ill = measure_controls(laboratory, sample, [fault])
    before = healthy.time < onset
    assert ill.text[: before.sum()].tolist() == healthy.text[before].tolist()
    late = ill.time >= onset
    assert ill.value[late].mean() - healthy.value[~before].mean() == pytest.approx(4.0, abs=0.2)
    assert ill.accepted[late].mean() < 0.1
    assert healthy.accepted.mean() > 0.9
