"""How long the search for a monitor takes: beside the same written with pandas and numpy, for a whole stream, and as both grow.

Run as `pytest tests/benchmarks/test_tuning_speed.py --override-ini addopts= -s`. Ratios are asserted; seconds are only told.
"""

import sys
from collections.abc import Callable
from functools import cache, partial
from time import process_time

import numpy as np
import pytest
from pytest_benchmark.fixture import BenchmarkFixture

from pbm.methods.candidates import WHOLE_GRID, Candidate, candidates
from pbm.methods.chain import Preparation
from pbm.methods.clock_time import local_days
from pbm.methods.faults import Fault
from pbm.methods.search import limited, scores
from pbm.methods.split import first_held_out_day, split_at
from pbm.methods.trials import alarm_and_stop
from pbm.records.laboratory import Lab
from pbm.stages.by_hand import NOTHING_BY_HAND
from pbm.stages.monitor_search import FIRST_HORIZON_DAYS, FIRST_ONSETS, MonitorSearch, Watch
from pbm.stages.proving_ground import ProvingGround
from pbm.stages.surroundings import Surroundings
from pbm.stages.tune import tune_stream
from tests.benchmarks.naive_search import naive_scores
from tests.stages.offline import history, laboratory, times

FAULTS = [{"kind": "shift", "sizes": [0.2, 0.3, 0.4, 0.5, 0.6, 0.8, 1.0, 1.25, 1.5, 2.0], "unit": "TEa"}]
SIZES = [
    Fault("shift", size, "TEa", sign)
    for size in (0.2, 0.3, 0.4, 0.5, 0.6, 0.8, 1.0, 1.25, 1.5, 2.0)
    for sign in (-1, 1)
]
SUBSET = [
    Candidate(Preparation(), statistic, parameter)
    for statistic, parameter in (
        ("ewma", 0.1), ("ewma", 0.03), ("mean", 20), ("mean", 80), ("median", 35), ("median", 81), ("cusum", 0.3), ("cusum", 0.75),
    )
]  # fmt: skip


@cache
def ground(results: int) -> ProvingGround:
    """A stream of so many results at 1,000 a day, the last third of its days held out."""
    lab = the_laboratory()
    days = results // 1_000
    time = times(days, 1_000)
    value = np.round(np.random.default_rng(3).normal(139, 3.5, results), 3)
    given = history(value, time)
    day = local_days(given.time, lab.laboratory.zone)
    split, around = split_at(day, first_held_out_day(day)), Surroundings.of(given.name, lab, 1)
    return ProvingGround(around, around.stretch(given.rows(slice(0, split.at))), split)


def the_laboratory() -> Lab:
    return laboratory(step=0.001, faults=FAULTS)


def tell(text: str) -> None:
    """A figure for who runs this with -s."""
    sys.stdout.write(f"{text}\n")


def of_process(work: Callable[[], object]) -> float:
    """Seconds of the processor."""
    before = process_time()
    work()
    return process_time() - before


def test_the_search_is_thirty_times_faster_than_the_same_in_pandas_and_numpy(benchmark: BenchmarkFixture) -> None:
    """Eight candidates of four statistics on 67,000 training results; the scores of both agree."""
    on = ground(100_000)
    expected = on.split.training_days / 30
    onsets = on.early_onsets(FIRST_ONSETS, FIRST_HORIZON_DAYS)
    trials = list(on.trials([(fault, 1.0) for fault in SIZES], onsets))
    stop = partial(alarm_and_stop, lag_results=10, lag_microseconds=0, time=on.training.time)

    def ours() -> np.ndarray:
        return scores(on.training, limited(on.training, SUBSET, expected), trials, stop)

    found = ours()  # compiles
    theirs = naive_scores(on.training, SUBSET, expected, trials, stop)
    np.testing.assert_allclose(found.mean(axis=1), theirs.mean(axis=1), rtol=0.02)
    ratio = of_process(lambda: naive_scores(on.training, SUBSET, expected, trials, stop)) / min(
        of_process(ours) for _ in range(3)
    )
    benchmark.extra_info["times_faster"] = ratio
    benchmark.pedantic(ours, rounds=2)  # type: ignore[no-untyped-call]
    tell(f"\nthe search beside pandas and numpy: {ratio:.0f} times as fast")
    assert ratio >= 30


def test_a_stream_of_100_000_results_and_700_candidates_is_told_in_seconds(benchmark: BenchmarkFixture) -> None:
    on = ground(100_000)
    search = MonitorSearch(on, Watch.shifts(on.faults), NOTHING_BY_HAND, WHOLE_GRID, on.split.training_days / 30)
    compiled = of_process(search.run)
    again = of_process(search.run)
    found = search.run()
    assert found is not None and found.rounds[0][0] >= 700
    benchmark.extra_info |= {"candidates": found.rounds[0][0], "seconds": again, "with_compiling": compiled}
    benchmark.pedantic(search.run, rounds=1)  # type: ignore[no-untyped-call]
    tell(
        f"\n{found.rounds[0][0]} candidates, 10 sizes to either side, 100,000 results: {again:.1f} s of one processor "
        f"({compiled:.1f} s the first time, with compiling)"
    )


@pytest.mark.parametrize("what", ["history", "candidates"])
def test_the_cost_grows_no_faster_than_history_and_candidates(what: str) -> None:
    """1, 2, 4 and 8 times as much takes at most as many times as long, but for a fifth."""
    took = []
    every = list(candidates([Preparation()], 2_000, WHOLE_GRID.shift))
    for times_more in (1, 2, 4, 8):
        on = ground(25_000 * (times_more if what == "history" else 2))
        given = every * (times_more if what == "candidates" else 2)
        onsets = on.early_onsets(FIRST_ONSETS, FIRST_HORIZON_DAYS)

        def work(on: ProvingGround = on, given: list[Candidate] = given, onsets: object = onsets) -> object:
            runners = limited(on.training, given, on.split.training_days / 30)
            return on.scores(runners, [(fault, 1.0) for fault in SIZES], onsets)  # type: ignore[arg-type]

        work()
        took.append(min(of_process(work) for _ in range(2)))
    tell(f"\n{what} 1, 2, 4, 8 times: " + ", ".join(f"{one / took[0]:.2f}" for one in took))
    assert took[-1] <= 8 * 1.2 * took[0]


def test_all_of_tune_on_such_a_stream_is_told_in_seconds() -> None:
    days = 100
    value = np.round(np.random.default_rng(3).normal(139, 3.5, days * 1_000), 3)
    given, lab = history(value, times(days, 1_000)), the_laboratory()
    took = of_process(lambda: tune_stream(given, lab, 1))
    tell(f"\nall of tune, 100,000 results: {took:.1f} s of one processor")
    assert tune_stream(given, lab, 1).plan.monitors
