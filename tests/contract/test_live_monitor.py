"""The promise: live = replay = restarted half-way, bit for bit, for every statistic; with truncation, winsorizing, transforms, censoring
and patient mix, and down to the texts of the alarms.
"""

import itertools
from dataclasses import dataclass, replace
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from pbm.methods.alarm import Limits, episodes
from pbm.methods.baseline import Baseline, Mix
from pbm.methods.chain import Preparation, Tracker, tracker_for
from pbm.methods.clock_time import hours_of_week
from pbm.methods.jit import Floats
from pbm.methods.statistics import STATISTICS
from pbm.records.alarm import Alarm
from pbm.records.plan import MonitorPlan
from pbm.records.result import Result
from pbm.records.sex_and_age import AGE_BANDS
from pbm.stages.alarm_line import alarm_line
from pbm.stages.monitor import StreamMonitor
from tests.contract.statistics_table import same_bits
from tests.live_laboratory import MINUTE, SODIUM, START, laboratory, monitor_plan

LAB = laboratory()
WARDS = ("ED", "ICU", "GP")
MIX = Baseline((("ED", 0.01), ("ICU", -0.02)), tuple(0.0005 * (hour % 24) for hour in range(168)))
PEOPLE = replace(MIX, sexes=(("F", -0.005), ("M", 0.004), ("", 0.001)), ages=(("under 1", -0.03), ("60-74", 0.007)))
PREPARATIONS = {
    "as it is": Preparation(),
    "truncated": Preparation(low=133.0, high=148.0),
    "winsorized": Preparation(low=134.0, high=147.0, winsorize=True),
    "logarithm": Preparation(low=130.0, transform="log"),
    "Box-Cox, winsorized": Preparation(high=147.0, winsorize=True, transform="boxcox", transform_lambda=0.3),
    "patient mix": Preparation(low=130.0, high=151.0, baseline=MIX),
    "patient mix on the logarithm": Preparation(transform="log", baseline=MIX),
    "patient mix with sex and age": Preparation(low=130.0, transform="log", baseline=PEOPLE),
}
PARAMETERS = {"window": 12, "weight": 0.15, "reference": 0.3}
CASES = list(itertools.product(STATISTICS, PREPARATIONS))


@dataclass(frozen=True)
class Case:
    """A stream of results, a monitor of it, and what history makes of the same results."""

    results: list[Result]
    plan: MonitorPlan
    path: Floats
    limits: Limits


def case(statistic: str, preparation: Preparation, count: int, seed: int) -> Case:
    """Results with shifts up and down, some censored; limits that are crossed several times."""
    random = np.random.default_rng(seed)
    x = random.normal(140, 4, count) + 3.0 * np.sin(np.arange(count) / 23)
    x[random.random(count) < 0.03] *= 1.2
    x = np.round(x, 1)
    censor = random.choice([0, 0, 0, 0, 0, 0, 0, -1, 1], count)
    x = np.where(censor < 0, 132.0, np.where(censor > 0, 150.0, x))
    ward = random.choice(WARDS, count)
    sex, age = random.choice(["F", "M", ""], count), random.choice([*AGE_BANDS, ""], count)
    time = START + np.cumsum(random.integers(1, 9 * MINUTE, count))
    results = [
        Result(int(t), SODIUM, float(v), int(c), f"31-{n}", str(w), sex=str(s), age=str(a))
        for n, (t, v, c, w, s, a) in enumerate(zip(time, x, censor, ward, sex, age, strict=True))
    ]
    zone: ZoneInfo = LAB.laboratory.zone
    z = preparation.all(x, censor.astype(float), Mix.of(ward, hours_of_week(time, zone), sex, age))
    tracker = centred(statistic, z)
    path = tracker.path(z)
    judged = path[~np.isnan(path)]
    reach = 1.1 * float(judged.std())
    limits = Limits(tracker.centre - reach, tracker.centre + reach, tracker.centre, 0.5)
    return Case(results, monitor_plan(tracker, preparation, limits, float(np.nanstd(z))), path, limits)


def centred(statistic: str, z: Floats) -> Tracker:
    """The statistic with parameters that make it move."""
    law = STATISTICS[statistic]
    more = {"low": float(np.nanquantile(z, 0.25)), "high": float(np.nanquantile(z, 0.75)), "exponent": 0.5}
    return tracker_for(
        z, statistic, PARAMETERS[law.parameter], **{k: v for k, v in more.items() if k in law.parameters}
    )


def statistic_after_each(monitor: StreamMonitor, results: list[Result]) -> Floats:
    """The statistic after each result; not a number where the result was dropped or the statistic not judged."""
    path = []
    for result in results:
        monitor.value = np.nan
        monitor.take(result)
        path.append(monitor.value)
    return np.array(path)


def alarms_of(monitor: StreamMonitor, results: list[Result]) -> list[tuple[int, Alarm]]:
    """The alarms and the places of their results."""
    return [(place, alarm) for place, result in enumerate(results) if (alarm := monitor.take(result))]


@pytest.mark.parametrize(("statistic", "preparation"), CASES, ids=[" of ".join(pair) for pair in CASES])
def test_live_gives_what_history_gives_bit_for_bit(statistic: str, preparation: str) -> None:
    given = case(statistic, PREPARATIONS[preparation], 700, seed=7)
    alarms = alarms_of(StreamMonitor(SODIUM, 0, given.plan, LAB), given.results)
    assert same_bits(statistic_after_each(StreamMonitor(SODIUM, 0, given.plan, LAB), given.results), given.path)
    expected = episodes(given.path, given.limits)
    assert [place for place, _ in alarms] == expected.at.tolist()
    assert [1 if alarm.side == "HIGH" else -1 for _, alarm in alarms] == expected.side.tolist()
    assert len(alarms) >= 3, "the test must meet alarms"


@pytest.mark.parametrize(("statistic", "preparation"), CASES, ids=[" of ".join(pair) for pair in CASES])
def test_restarted_through_bytes_after_any_result_nothing_changes(statistic: str, preparation: str) -> None:
    given = case(statistic, PREPARATIONS[preparation], 60, seed=11)
    whole = StreamMonitor(SODIUM, 0, given.plan, LAB)
    alarms = alarms_of(whole, given.results)
    walking = StreamMonitor(SODIUM, 0, given.plan, LAB)
    for cut in range(len(given.results) + 1):
        restarted = StreamMonitor(SODIUM, 0, given.plan, LAB)
        restarted.go_on(walking.to_bytes(), given.results[:cut])
        after = [(cut + place, alarm) for place, alarm in alarms_of(restarted, given.results[cut:])]
        assert after == [(place, alarm) for place, alarm in alarms if place >= cut]
        assert [_line(alarm) for _, alarm in after] == [_line(alarm) for place, alarm in alarms if place >= cut]
        assert restarted.to_bytes() == whole.to_bytes()
        if cut < len(given.results):
            walking.take(given.results[cut])
    assert alarms, "the test must meet alarms"


def _line(alarm: Alarm) -> str:
    return alarm_line(alarm, LAB.analytes["sodium"], LAB.laboratory.zone)
