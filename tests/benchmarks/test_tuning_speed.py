"""How long the search for a monitor takes: beside the same written with pandas and numpy, for a whole stream, and as both grow.

Run as `pytest tests/benchmarks/test_tuning_speed.py --override-ini addopts= -s`. Ratios are asserted; seconds are only told.
"""

from collections.abc import Callable
from functools import cache, partial
from time import process_time

import numpy as np
import pytest
from pytest_benchmark.fixture import BenchmarkFixture

from pbm.methods.candidates import WHOLE_GRID, Candidate, candidates
from pbm.methods.chain import Preparation
from pbm.methods.clock_time import local_days
from pbm.methods.expected import Onsets
from pbm.methods.faults import Fault
from pbm.methods.search import limited, scores
from pbm.methods.split import first_held_out_day, split_at
from pbm.methods.trials import alarm_and_stop
from pbm.records.laboratory import Lab
from pbm.stages.by_hand import NOTHING_BY_HAND
from pbm.stages.monitor_search import FIRST_HORIZON_DAYS, FIRST_ONSETS, MonitorSearch, Watch
from pbm.stages.proving_ground import ProvingGround
from pbm.stages.surroundings import Surroundings
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


def of_process(work: Callable[[], object]) -> float:
    """Seconds of the processor."""
    before = process_time()
    work()
    return process_time() - before


class Race:
    """Eight candidates of four statistics on 67,000 training results, ten sizes to either side, by pbm and by pandas and numpy."""

    def __init__(self) -> None:
        self.on = ground(100_000)
        self.expected = self.on.split.training_days / 30
        onsets = self.on.early_onsets(FIRST_ONSETS, FIRST_HORIZON_DAYS)
        self.trials = list(self.on.trials([(fault, 1.0) for fault in SIZES], onsets))
        self.stop = partial(alarm_and_stop, lag_results=10, lag_microseconds=0, time=self.on.training.time)

    def ours(self) -> np.ndarray:
        runners = limited(self.on.training, SUBSET, self.expected)
        return scores(self.on.training, runners, self.trials, self.stop)

    def theirs(self) -> np.ndarray:
        return naive_scores(self.on.training, SUBSET, self.expected, self.trials, self.stop)

    def ratio(self) -> float:
        """How many times as fast ours is, by seconds of the processor; compiled before."""
        self.ours()
        return of_process(self.theirs) / min(of_process(self.ours) for _ in range(3))


def search_of(on: ProvingGround) -> MonitorSearch:
    """The whole search for a shift monitor."""
    return MonitorSearch(on, Watch.shifts(on.faults), NOTHING_BY_HAND, WHOLE_GRID, on.split.training_days / 30)


def growth(what: str) -> list[float]:
    """Seconds of the processor for the first round with 1, 2, 4 and 8 times the history, or the candidates."""
    took = []
    every = list(candidates([Preparation()], 2_000, WHOLE_GRID.shift))
    for times_more in (1, 2, 4, 8):
        on = ground(25_000 * (times_more if what == "history" else 2))
        given = every * (times_more if what == "candidates" else 2)
        onsets = on.early_onsets(FIRST_ONSETS, FIRST_HORIZON_DAYS)

        def work(on: ProvingGround = on, given: list[Candidate] = given, onsets: Onsets = onsets) -> object:
            runners = limited(on.training, given, on.split.training_days / 30)
            return on.scores(runners, [(fault, 1.0) for fault in SIZES[::4]], onsets)

        work()
        took.append(min(of_process(work) for _ in range(2)))
    return took


def test_the_search_is_thirty_times_faster_than_the_same_in_pandas_and_numpy(benchmark: BenchmarkFixture) -> None:
    """The scores of both agree."""
    race = Race()
    np.testing.assert_allclose(race.ours().mean(axis=1), race.theirs().mean(axis=1), rtol=0.02)
    ratio = race.ratio()
    benchmark.extra_info["times_faster"] = ratio
    benchmark.pedantic(race.ours, rounds=2)  # type: ignore[no-untyped-call]
    assert ratio >= 30, f"{ratio:.1f} times as fast"


def test_a_stream_of_100_000_results_has_700_candidates_or_more(benchmark: BenchmarkFixture) -> None:
    search = search_of(ground(100_000))
    found = search.run()
    assert found is not None and found.rounds[0][0] >= 700
    benchmark.extra_info |= {"candidates": found.rounds[0][0], "seconds": of_process(search.run)}
    benchmark.pedantic(search.run, rounds=1)  # type: ignore[no-untyped-call]


@pytest.mark.parametrize("what", ["history", "candidates"])
def test_the_cost_grows_no_faster_than_history_and_candidates(what: str) -> None:
    """Eight times as much takes at most eight times as long, but for a fifth."""
    took = growth(what)
    assert took[-1] <= 8 * 1.2 * took[0], took
