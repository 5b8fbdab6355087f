"""Control limits: the budget is kept on days never seen, limits lie off the lattice, intervals cover, no tail means no limits."""

import math
from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter

from pbm.methods.alarm import Limits, count_episodes, episodes
from pbm.methods.chain import Tracker, tracker_for
from pbm.methods.jit import Floats
from pbm.methods.limits import Tail, calibrated_limits, quick_limits, tail_of
from pbm.methods.seeds import child

PER_DAY, TRAINING, HELD_OUT = 200, 80, 400
BUDGET = 1 / 30  # episodes a day, both sides
EXPECTED = BUDGET * TRAINING


def normal(count: int, random: np.random.Generator) -> Floats:
    return random.standard_normal(count)


def correlated(count: int, random: np.random.Generator) -> Floats:
    return np.asarray(lfilter([1.0], [1.0, -0.5], random.standard_normal(count)))


def skewed(count: int, random: np.random.Generator) -> Floats:
    return np.exp(0.5 * random.standard_normal(count))


def whole_numbers(count: int, random: np.random.Generator) -> Floats:
    return np.rint(random.normal(140, 3, count))


def tenths(count: int, random: np.random.Generator) -> Floats:
    return np.round(random.normal(4.2, 0.4, count), 1)


def logs_of_whole_numbers(count: int, random: np.random.Generator) -> Floats:
    return np.log(np.maximum(np.rint(np.exp(random.normal(3.1, 0.5, count))), 1))


Draw = Callable[[int, np.random.Generator], Floats]


def rate_on_days_never_seen(draw: Draw, statistic: str, parameter: float, calibrated: bool, seeds: int) -> float:
    """Mean over seeded streams of held-out episodes over what the budget allows."""
    found = []
    for seed in range(seeds):
        random = child(seed, "held out", draw.__name__, statistic)
        z = draw(PER_DAY * (TRAINING + HELD_OUT), random)
        training = z[: PER_DAY * TRAINING]
        tracker = tracker_for(training, statistic, parameter)
        days = np.arange(TRAINING + 1) * PER_DAY
        limits = (
            calibrated_limits(tracker, training, days, EXPECTED, random, draws=40).limits  # type: ignore[union-attr]
            if calibrated
            else quick_limits(tracker.path(training), tracker.centre, EXPECTED)
        )
        assert limits is not None
        at = episodes(tracker.path(z), limits).at
        found.append((at >= len(training)).sum() / (BUDGET * HELD_OUT))
    return float(np.mean(found))


@pytest.mark.parametrize(
    ("draw", "statistic", "parameter"),
    [(normal, "ewma", 0.1), (normal, "mean", 20), (correlated, "ewma", 0.05), (skewed, "ewma", 0.1)],
)
def test_alarms_on_days_never_seen_keep_to_the_budget_on_average(draw: Draw, statistic: str, parameter: float) -> None:
    """An average of results has a tail between exponential and normal, so the exponential tail errs to the side of fewer alarms."""
    assert 0.7 < rate_on_days_never_seen(draw, statistic, parameter, calibrated=False, seeds=80) < 1.25
    assert 0.7 < rate_on_days_never_seen(draw, statistic, parameter, calibrated=True, seeds=20) < 1.25


@pytest.mark.parametrize(
    ("draw", "statistic", "parameter", "least"),
    [
        (whole_numbers, "mean", 5, 0.45),
        (tenths, "mean", 10, 0.45),
        (logs_of_whole_numbers, "median", 21, 0.1),
        (whole_numbers, "median", 21, 0.0),
    ],
)
def test_on_a_lattice_the_rate_is_at_most_the_budget(
    draw: Draw, statistic: str, parameter: float, least: float
) -> None:
    """Only the gaps of the lattice can be had; the first one within the budget is taken, and a coarse lattice makes it a wide one."""
    assert least <= rate_on_days_never_seen(draw, statistic, parameter, calibrated=False, seeds=25) < 1.1


def nearest_point(limit: float, step: float) -> float:
    """Distance from a limit to the nearest multiple of a step, in steps."""
    return abs(limit / step - round(limit / step))


@pytest.mark.parametrize(
    ("draw", "statistic", "parameter", "step"),
    [
        (whole_numbers, "mean", 5, 0.2),
        (whole_numbers, "median", 21, 1.0),
        (whole_numbers, "median", 20, 0.5),
        (whole_numbers, "median", 101, 1.0),
        (tenths, "mean", 5, 0.02),
        (tenths, "mean", 10, 0.01),
        (tenths, "median", 51, 0.1),
    ],
)
def test_no_limit_lies_on_a_lattice_point(draw: Draw, statistic: str, parameter: float, step: float) -> None:
    for seed in range(12):
        z = draw(PER_DAY * TRAINING, child(seed, "lattice"))
        tracker = tracker_for(z, statistic, parameter)
        limits = quick_limits(tracker.path(z), tracker.centre, EXPECTED)
        assert limits is not None
        assert nearest_point(limits.low, step) > 0.49
        assert nearest_point(limits.high, step) > 0.49


def test_values_that_differ_by_rounding_errors_count_as_one_lattice_point() -> None:
    """A running sum of tenths gives 4.2 as 4.2 and as 4.199999999999999: half-way between those two no limit may lie."""
    random = child(1, "fuzz")
    path = np.round(random.normal(0, 1, 20_000), 1)
    fuzzy = path + random.choice([0.0, 3e-16, -3e-16], len(path))
    limits = quick_limits(fuzzy, 0.0, 40.0)
    assert limits is not None
    assert nearest_point(limits.low, 0.1) > 0.49 and nearest_point(limits.high, 0.1) > 0.49
    assert limits == pytest.approx(quick_limits(path, 0.0, 40.0), abs=1e-9)


def true_distance(path: Floats, centre: float, side: int, expected: float) -> float:
    """The distance beyond which a long path has the expected number of episodes, by bisection."""
    outward = side * (path - centre)
    inner, outer = 0.0, float(outward.max())
    for _ in range(40):
        middle = (inner + outer) / 2
        many = count_episodes(outward, Limits(-math.inf, middle, 0.0, 0.5)) > expected
        inner, outer = (middle, outer) if many else (inner, middle)
    return outer


def test_the_interval_of_a_limit_covers_the_true_one_in_about_nine_of_ten_streams() -> None:
    tracker, histories = Tracker("ewma", 0.1, 0.0), 200
    long = tracker.path(child(1, "truth").standard_normal(PER_DAY * TRAINING * histories))
    truth = [true_distance(long, 0.0, side, EXPECTED / 2 * histories) for side in (-1, 1)]
    days, inside = np.arange(TRAINING + 1) * PER_DAY, 0
    for seed in range(50):
        z = child(seed, "cover").standard_normal(PER_DAY * TRAINING)
        found = calibrated_limits(tracker, z, days, EXPECTED, child(seed, "draws"), draws=60)
        assert found is not None
        assert found.low_interval[0] <= found.limits.low <= found.low_interval[1]
        assert found.high_interval[0] <= found.limits.high <= found.high_interval[1]
        inside += found.low_interval[0] <= -truth[0] <= found.low_interval[1]
        inside += found.high_interval[0] <= truth[1] <= found.high_interval[1]
    assert 80 <= inside <= 97


def test_the_same_generator_gives_the_same_calibrated_limits() -> None:
    z, days = child(5, "same").standard_normal(8000), np.arange(41) * 200
    tracker = tracker_for(z, "mean", 10)
    one, other = (calibrated_limits(tracker, z, days, 2.0, child(6, "draws"), draws=20) for _ in range(2))
    assert one == other


@pytest.mark.parametrize(("upper", "low", "high"), [(1.0, False, True), (0.0, True, False), (0.8, True, True)])
def test_a_side_has_its_share_of_the_budget_and_none_has_no_limit(upper: float, low: bool, high: bool) -> None:
    z, days = child(11, "sides").standard_normal(20_000), np.arange(101) * 200
    tracker = tracker_for(z, "ewma", 0.1)
    path = tracker.path(z)
    quick = quick_limits(path, tracker.centre, 20.0, upper)
    calibrated = calibrated_limits(tracker, z, days, 20.0, child(12, "sides"), draws=20, upper=upper)
    assert quick is not None and calibrated is not None
    for limits in (quick, calibrated.limits):
        assert (math.isfinite(limits.low), math.isfinite(limits.high)) == (low, high)
        sides = episodes(path, limits).side
        assert 0.5 * 20 * upper <= (sides > 0).sum() <= 1.5 * 20 * upper
        assert 0.5 * 20 * (1 - upper) <= (sides < 0).sum() <= 1.5 * 20 * (1 - upper) + 1e-9
    assert (calibrated.low_interval is not None, calibrated.high_interval is not None) == (low, high)
    assert calibrated.episodes == len(episodes(path, calibrated.limits))


@pytest.mark.parametrize("upper", [-0.1, 1.1])
def test_a_share_of_the_budget_lies_between_none_and_all(upper: float) -> None:
    with pytest.raises(ValueError, match="between 0 and 1"):
        quick_limits(np.arange(100.0), 0.0, 2.0, upper)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 10_000), st.floats(0.2, 12), st.floats(1.0, 3.0))
def test_a_larger_budget_never_widens_a_limit(seed: int, expected: float, more: float) -> None:
    path = Tracker("ewma", 0.1, 0.0).path(np.random.default_rng(seed).standard_normal(6000))
    narrow, wide = quick_limits(path, 0.0, expected * more), quick_limits(path, 0.0, expected)
    assert narrow is not None and wide is not None
    assert wide.low <= narrow.low < 0 < narrow.high <= wide.high


def test_turning_the_path_over_turns_the_limits_over() -> None:
    path = Tracker("mean", 10, 0.0).path(child(7, "skew").exponential(1.0, 8000) - 1)
    up, down = quick_limits(path, 0.0, 3.0), quick_limits(-path, 0.0, 3.0)
    assert up is not None and down is not None
    assert (up.low, up.high) == (-down.high, -down.low)


@pytest.mark.parametrize(
    "path",
    [
        np.zeros(500),
        np.full(500, 0.3),
        np.full(500, np.nan),
        np.append(np.zeros(10), np.full(500, np.nan)),
        np.linspace(0.3, 0.3 + 1e-14, 500),
        np.zeros(0),
        np.arange(10.0),
    ],
    ids=["zero", "constant", "never judged", "hardly judged", "rounding errors", "empty", "short"],
)
def test_a_path_without_a_tail_has_no_limits(path: Floats) -> None:
    centre = float(np.nanmean(path)) if np.isfinite(path).any() else 0.0
    assert quick_limits(path, centre, 2.0) is None


def test_a_path_that_never_lies_below_its_centre_has_no_lower_tail() -> None:
    path = np.abs(child(8, "one side").standard_normal(5000))
    assert tail_of(path, 0.0, -1, 1.0) is None
    assert tail_of(path, 0.0, 1, 1.0) is not None
    assert quick_limits(path, 0.0, 2.0) is None


def test_days_without_a_tail_have_no_calibrated_limits() -> None:
    z, days = np.full(4000, 0.7), np.arange(21) * 200
    for statistic, parameter in (("ewma", 0.1), ("mean", 10), ("median", 9)):
        assert calibrated_limits(tracker_for(z, statistic, parameter), z, days, 1.0, child(9, "draws")) is None


def test_the_predictive_limit_lies_beyond_the_one_at_face_value_and_nears_it_with_more_episodes() -> None:
    few, many = Tail(1.0, 10, 0.2), Tail(1.0, 10_000, 0.2)
    assert few.limit(1.0) > few.face_value_limit(1.0) == pytest.approx(1.0 + 0.2 * math.log(10))
    assert many.limit(1.0) == pytest.approx(many.face_value_limit(1.0), rel=1e-3)
    assert few.rate(few.face_value_limit(1.0)) == pytest.approx(1.0)


def test_the_predictive_limit_is_right_on_average_for_exponential_excesses() -> None:
    """Learn beta from m excesses and look at the true rate beyond the limit: its mean over all such histories is the budget."""
    m, expected, beta = 12, 1.5, 0.7
    excess = child(10, "excess").exponential(beta, (200_000, m)).mean(axis=1)
    rates = [m * math.exp(-(Tail(0.0, m, e).limit(expected)) / beta) for e in excess.tolist()]
    assert np.mean(rates) == pytest.approx(expected, abs=4 * np.std(rates) / math.sqrt(len(rates)))


def test_limits_of_a_cusum_are_never_so_uneven_that_one_sum_could_hide_the_other() -> None:
    """A skewed history wants a far upper limit; the lower one moves out to half of it, and so alarms less often than it may."""
    z = np.random.default_rng(3).gamma(0.5, 2, 20_000)
    tracker = tracker_for(z, "cusum", 0.3)
    uneven = Limits(-2.0, 9.0, 0.0, 0.5)
    assert tracker.admissible(uneven) == Limits(-4.5, 9.0, 0.0, 0.5)
    assert tracker.admissible(Limits(-9.0, 2.0, 0.0, 0.5)) == Limits(-9.0, 4.5, 0.0, 0.5)
    assert tracker.admissible(Limits(-2.0, 4.0, 0.0, 0.5)) == Limits(-2.0, 4.0, 0.0, 0.5)
    mean = tracker_for(z, "mean", 20)
    assert mean.admissible(uneven) == uneven
    found = calibrated_limits(tracker, z, np.arange(0, 20_001, 500), 2.0, np.random.default_rng(4), draws=20)
    assert found is not None
    below, above = -found.limits.low, found.limits.high
    assert max(below, above) <= 2 * min(below, above) * (1 + 1e-12)
