"""Our statistics and monitor behind river's interface: its generic checks, and the same values and alarms as everywhere else."""

import pickle
from collections.abc import Callable, Iterator

import numpy as np
import pytest
from river import base, checks, drift, stats

from pbm.methods.alarm import Limits, episodes
from pbm.methods.chain import Preparation, Tracker
from pbm.records.plan import Admit, ControlLimits, MonitorPlan
from pbm.streaming import StreamMonitor, StreamStatistic
from tests.contract.statistics_table import LEVEL, SPREAD, TRACKERS, same_bits, stream

LIMITS = Limits(LEVEL - 2.0, LEVEL + 2.0, LEVEL, 0.5)


def monitor() -> StreamMonitor:
    return StreamMonitor(Tracker("ewma", 0.1, LEVEL), LIMITS, Preparation(LEVEL - 9.0, LEVEL + 9.0))


def general_checks(model: base.Base) -> Iterator[Callable[[base.Base], None]]:
    """River's generic checks, without those that need data sets of a package that is not installed."""
    try:
        yield from checks.yield_checks(model)  # type: ignore[arg-type]  # river's own detectors are no Estimator either
    except ModuleNotFoundError:
        return


@pytest.mark.parametrize(
    ("ours", "theirs"),
    [(StreamStatistic(Tracker("mean", 20, LEVEL)), stats.Mean()), (monitor(), drift.PageHinkley())],
    ids=["statistic", "monitor"],
)
def test_every_generic_check_that_holds_for_rivers_own_holds_for_ours(ours: base.Base, theirs: base.Base) -> None:
    passed = []
    for check in general_checks(theirs):
        try:
            check(theirs.clone())
        except AttributeError:
            continue  # a check of what only predictors have
        check(ours.clone())
        passed.append(check.__name__)
    assert {"check_repr", "check_clone_is_idempotent", "check_pickling_supports_roundtrip", "check_doc"} <= set(passed)


@pytest.mark.parametrize("name", TRACKERS)
def test_a_stream_statistic_gives_the_path_of_the_history(name: str) -> None:
    z = stream(21, 200, dropped=0.1)
    statistic = StreamStatistic(TRACKERS[name])
    values = []
    for x in z.tolist():
        statistic.update(x)
        values.append(np.nan if np.isnan(x) or statistic.get() is None else statistic.get())
    assert same_bits(np.array(values, dtype=np.float64), TRACKERS[name].path(z))


def test_a_stream_monitor_opens_the_episodes_of_the_history() -> None:
    x = stream(22, 3_000)
    x[1_000:] += SPREAD / 2
    ours = monitor()
    opened, sides = [], []
    for i, value in enumerate(x.tolist()):
        ours.update(value)
        if ours.drift_detected:
            opened.append(i)
            sides.append(ours.episode)
    assert ours.preparation is not None
    expected = episodes(ours.tracker.path(ours.preparation.all(x, np.zeros(len(x)))), LIMITS)
    assert len(opened) > 3
    assert opened == expected.at.tolist()
    assert sides == expected.side.tolist()


def test_a_pickled_copy_goes_on_where_the_original_stood_and_a_clone_begins_afresh() -> None:
    x = stream(23, 400)
    whole, ours = monitor(), monitor()
    for value in x[:200].tolist():
        whole.update(value)
        ours.update(value)
    ours = pickle.loads(pickle.dumps(ours))
    for value in x[200:].tolist():
        whole.update(value)
        ours.update(value)
    assert (ours.value, ours.episode) == (whole.value, whole.episode)
    fresh = ours.clone()
    assert (fresh.value, fresh.episode, fresh.drift_detected) == (None, 0, False)
    fresh.update(x[0])
    again = monitor()
    again.update(x[0])
    assert fresh.value == again.value


def test_statistics_of_ours_and_of_river_can_be_chained() -> None:
    chained = stats.Shift(1) | StreamStatistic(Tracker("mean", 2, LEVEL))
    for x in (1.0, 2.0, 4.0):
        chained.update(x)
    assert chained.get() == 1.5
    assert chained.name == "mean_2_of_shift_1"


def test_a_monitor_from_a_plan_drops_what_the_plan_drops() -> None:
    plan = MonitorPlan(
        admit=Admit(low=125, high=155),
        statistic="ewma",
        weight=0.5,
        centre=LEVEL,
        limits=ControlLimits(low=136.5, high=141.3),
        budget_per_day=0.1,
        spread=SPREAD,
    )
    ours, met = StreamMonitor.from_plan(plan), []
    for x, censor in ((160.0, 0), (150.0, 1), (142.0, 0), (144.0, 0)):
        ours.update(x, censor)
        met.append((ours.value, ours.drift_detected))
    # The first is truncated; the second, ">150", may lie above 155.
    assert met == [(None, False), (None, False), (141.0, False), (142.5, True)]


def test_memory_does_not_grow_with_the_stream() -> None:
    ours, sizes = monitor(), []
    for part in range(3):
        for value in stream(part, 2_000).tolist():
            ours.update(value)
        sizes.append(ours._raw_memory_usage)
    assert max(sizes) - min(sizes) < 200
