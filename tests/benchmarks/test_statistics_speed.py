"""How fast the statistics are beside pandas and river: ratios, both sides timed in turn in one run.

Run as `pytest tests/benchmarks --override-ini addopts=`. Ratios depend on the machine only a little; each is asserted at what the tool
promises, and told as `times_faster` in the table of pytest-benchmark (`--benchmark-json`).
"""

import copy
from collections.abc import Callable
from time import perf_counter
from typing import Any

import numpy as np
import pandas as pd
import pytest
from pytest_benchmark.fixture import BenchmarkFixture
from river.stats import EWMean, Mean
from river.utils import Rolling

from pbm.methods.chain import Tracker
from pbm.methods.jit import Integers
from pbm.streaming import StreamStatistic

LEVEL, SPREAD = 140.0, 3.0
Z = np.random.default_rng(0).normal(LEVEL, SPREAD, 1_000_000)
SERIES = pd.Series(Z)
MEAN, MEDIAN, EWMA = Tracker("mean", 50, LEVEL), Tracker("median", 51, LEVEL), Tracker("ewma", 0.05, LEVEL)


def seconds(work: Callable[[], object], repeats: int = 3) -> float:
    """Shortest of a few runs in a row: the first finds the caches full of what the other side left."""
    shortest = float("inf")
    for _ in range(repeats):
        before = perf_counter()
        work()
        shortest = min(shortest, perf_counter() - before)
    return shortest


def assert_times_faster(
    benchmark: BenchmarkFixture,
    ours: Callable[[], object],
    theirs: Callable[[], object],
    at_least: float,
    shares: float = 1.0,
    rounds: int = 10,
) -> None:
    """Best of several rounds of each, in turn; `shares` is how many times the work of theirs ours does."""
    ours()  # compiles
    pairs = [(seconds(ours), seconds(theirs)) for _ in range(rounds)]
    ratio = shares * min(b for _, b in pairs) / min(a for a, _ in pairs)
    benchmark.extra_info["times_faster"] = ratio
    benchmark.pedantic(ours, rounds=3)  # type: ignore[no-untyped-call]
    assert ratio >= at_least, f"{ratio:.2f} times as fast, promised {at_least:g}"


def test_the_scan_of_a_moving_mean_is_five_times_faster_than_pandas_rolling(benchmark: BenchmarkFixture) -> None:
    assert_times_faster(benchmark, lambda: MEAN.path(Z), lambda: SERIES.rolling(50).mean(), 5.0)


def test_the_scan_of_an_ewma_is_no_slower_than_pandas_ewm(benchmark: BenchmarkFixture) -> None:
    assert_times_faster(benchmark, lambda: EWMA.path(Z), lambda: SERIES.ewm(alpha=0.05, adjust=False).mean(), 1.0)


def test_the_scan_of_a_moving_median_is_twice_as_fast_as_pandas_rolling(benchmark: BenchmarkFixture) -> None:
    assert_times_faster(benchmark, lambda: MEDIAN.path(Z), lambda: SERIES.rolling(51).median(), 2.0, rounds=3)


def test_the_scan_of_a_moving_sd_is_no_slower_than_pandas_rolling(benchmark: BenchmarkFixture) -> None:
    tracker = Tracker("sd", 25, SPREAD)
    assert_times_faster(benchmark, lambda: tracker.path(Z), lambda: SERIES.rolling(25).std(), 1.0)


# River's EWMean is itself compiled (0.2 us an update), so that the ratio there, about 100 to 140, says more of river than of us.
@pytest.mark.parametrize(
    ("tracker", "half_width", "at_least"), [(MEAN, 1.3, 100.0), (EWMA, 1.2, 50.0)], ids=["mean", "ewma"]
)
def test_simulated_onsets_are_far_faster_than_a_loop_over_rivers_objects(
    benchmark: BenchmarkFixture, tracker: Tracker, half_width: float, at_least: float
) -> None:
    """A shift of half an SD from each of 2,000 onsets on, followed to the alarm or for 100 results."""
    at = np.linspace(1_000, 900_000, 2_000).astype(np.int64)
    ends, low, high = at + 100, LEVEL - half_width, LEVEL + half_width
    faulty, states, few = Z + SPREAD / 2, tracker.states_at(Z, at), at[::20]
    theirs, values = _river_states(tracker, few), faulty.tolist()

    def river_loop() -> list[int]:
        return [_first_alarm(copy.deepcopy(s), values, o, low, high) for s, o in zip(theirs, few.tolist(), strict=True)]

    def ours() -> Integers:
        return tracker.first_crossings(faulty, states, at, ends, low, high)

    assert river_loop() == ours()[::20].tolist()
    assert_times_faster(benchmark, ours, river_loop, at_least, shares=20.0, rounds=20)


def _river_states(tracker: Tracker, at: Integers) -> list[Any]:
    """River's object for the same statistic, as it stands before each index."""
    running: Any = Rolling(Mean, window_size=50) if tracker is MEAN else EWMean(fading_factor=0.05)
    if tracker is EWMA:
        running.update(LEVEL)
    states = []
    for first, last in zip([0, *at[:-1]], at, strict=True):
        for x in Z[first:last].tolist():
            running.update(x)
        states.append(copy.deepcopy(running))
    return states


def _first_alarm(statistic: Any, values: list[float], onset: int, low: float, high: float) -> int:
    for i in range(onset, onset + 100):
        statistic.update(values[i])
        if not low <= statistic.get() <= high:
            return i
    return -1


def _live(tracker: Tracker, values: list[float]) -> None:
    step, par, state = tracker.law.step, tracker.par, tracker.start()
    for x in values:
        step(state, x, par)


@pytest.mark.parametrize("through", ["step", "river's interface"])
def test_a_live_step_is_no_slower_than_rivers_rolling_mean(benchmark: BenchmarkFixture, through: str) -> None:
    values = Z[:100_000].tolist()

    def ours() -> None:
        if through == "step":
            return _live(MEAN, values)
        statistic = StreamStatistic(MEAN)
        for x in values:
            statistic.update(x)
            statistic.get()
        return None

    def theirs() -> None:
        rolling: Any = Rolling(Mean, window_size=50)
        for x in values:
            rolling.update(x)
            rolling.get()

    assert_times_faster(benchmark, ours, theirs, 1.0, rounds=3)
