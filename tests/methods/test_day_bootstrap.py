"""Bootstrap over days against draws written out one by one, and its coverage on days that hang together."""

import numpy as np
import pytest
from scipy.stats import t as student

from pbm.methods.day_bootstrap import DayBootstrap, Estimate, average, ends, largest, on_weekend
from pbm.methods.detection import Detection
from pbm.methods.seeds import child

MONDAY = 4  # 1970-01-05
DAYS = MONDAY + np.array([0, 0, 0, 1, 1, 2, 5, 5, 6, 9, 13])


def drawn(draws: int = 300, days: np.ndarray = DAYS) -> DayBootstrap:
    return DayBootstrap.of(days, draws, child(1, "days"))


def test_saturdays_and_sundays_are_the_weekend() -> None:
    assert on_weekend(MONDAY + np.arange(8)).tolist() == [False] * 5 + [True, True, False]


def test_working_days_and_weekend_days_are_drawn_each_among_themselves() -> None:
    days = MONDAY + np.arange(35)
    taken, weekend = drawn(300, days).taken, on_weekend(days)
    assert len(set(taken[:, weekend].sum(axis=1))) == len(set(taken[:, ~weekend].sum(axis=1))) == 1
    assert taken[0, weekend].sum() == 9 and taken[0, ~weekend].sum() == 22, (
        "somewhat fewer than the 10 and 25 there are"
    )
    assert taken.std(axis=0).min() > 0


@pytest.mark.parametrize("days", [3, 6, 12, 40])
def test_an_interval_of_few_days_is_as_wide_as_that_of_student(days: int) -> None:
    calendar = MONDAY + np.arange(80)
    working = calendar[~on_weekend(calendar)][:days]
    each = child(6, days).normal(size=days)
    found = DayBootstrap.of(working, 20_000, child(7, days)).mean(each)
    half = float(student.ppf(0.95, days - 1)) * each.std(ddof=1) / days**0.5
    assert 1.645 * found.drawn.std() == pytest.approx(half, rel=0.25 if days < 6 else 0.1)


def test_a_mean_in_a_draw_is_that_of_the_observations_of_its_days() -> None:
    boot, each = drawn(40), np.arange(len(DAYS), dtype=float) ** 2
    found = boot.mean(each)
    assert found.value == each.mean()
    for b, counts in enumerate(boot.taken.astype(int)):
        observed = [x for x, day in zip(each, boot.day, strict=True) for _ in range(counts[day])]
        assert found.drawn[b] == pytest.approx(np.mean(observed))


def test_a_mean_of_some_observations_leaves_the_others_out_and_tells_nothing_where_there_are_none() -> None:
    boot = drawn(200)
    each, within = np.arange(len(DAYS), dtype=float), DAYS == MONDAY + 2
    found = boot.mean(each, within)
    assert found.value == 5.0
    without = boot.taken[:, boot.day[5]] == 0
    assert 0 < without.sum() < 200 and np.isnan(found.drawn[without]).all() and (found.drawn[~without] == 5.0).all()
    assert found.interval == (5.0, 5.0)


def test_an_interval_is_that_of_the_percentiles_and_holds_its_figure() -> None:
    values = child(2, "values").normal(size=400)
    low, high = ends(values, 0.0)
    assert (low, high) == pytest.approx(tuple(np.quantile(values, [0.05, 0.95])))
    assert ends(values, 9.0) == (low, 9.0) and ends(values, -9.0) == (-9.0, high)
    assert ends(np.array([np.nan]), 3.0) == (3.0, 3.0)


def test_differences_and_shares_are_taken_draw_by_draw() -> None:
    boot, random = drawn(), child(3, "each")
    alone = boot.mean(random.random(len(DAYS)) + 1)
    beside = boot.mean(random.random(len(DAYS)))
    fewer = alone - beside
    np.testing.assert_allclose(fewer.drawn, alone.drawn - beside.drawn)
    np.testing.assert_allclose(fewer.share_of(alone).drawn, fewer.drawn / alone.drawn)
    nothing = boot.mean(np.zeros(len(DAYS)))
    assert nothing.share_of(nothing).value == 0 and (nothing.share_of(nothing).drawn == 0).all()
    mean = average([alone, beside], [3.0, 1.0])
    assert mean.value == pytest.approx((3 * alone.value + beside.value) / 4)
    np.testing.assert_allclose(mean.drawn, (3 * alone.drawn + beside.drawn) / 4)


def test_the_largest_is_sought_in_each_draw_anew() -> None:
    first, second = Estimate(2.0, np.array([2.0, 1.0, 3.0, 2.0])), Estimate(1.5, np.array([1.0, 4.0, 1.0, 1.0]))
    found, place, agreed = largest([first, second])
    assert (found.value, place, agreed) == (2.0, 0, 0.75)
    assert found.drawn.tolist() == [2.0, 4.0, 3.0, 2.0]


@pytest.mark.parametrize("share", [0.05, 0.5, 0.9])
def test_a_percentile_is_that_of_all_points_and_its_draws_those_of_their_days(share: float) -> None:
    random = child(4, "points")
    days = np.sort(MONDAY + random.integers(0, 20, 60))
    boot = drawn(200, days)
    delay = random.integers(1, 40, (60, 3)).astype(float)
    chance = random.dirichlet([1, 1, 1, 0.3], 60)[:, :3]
    found = Detection(delay, chance, np.full(60, 50.0))
    value, low, high = boot.percentiles(found, [share])[0]
    assert value == found.quantile(share)
    naive = sorted(percentile_of(boot.taken[b], boot.day, found, share) for b in range(200))
    assert [value if x is None else x for x in (low, high)] == [
        value if np.isinf(x) else x for x in (min(naive[10], value or np.inf), max(naive[189], value or 0))
    ]


def percentile_of(taken: np.ndarray, day: np.ndarray, found: Detection, share: float) -> float:
    """Percentile of a draw, point by point."""
    total = sum(taken[d] for d in day)
    points = sorted(
        (float(x), float(c) * taken[d])
        for d, xs, cs in zip(day, found.delay, found.chance, strict=True)
        for x, c in zip(xs, cs, strict=True)
    )
    reached = 0.0
    for x, mass in points:
        reached += mass / total
        if reached >= share - 1e-9:
            return x
    return float("inf")


def test_what_is_never_found_has_no_percentile_but_its_interval_may_have_one_end() -> None:
    days = np.repeat(MONDAY + np.arange(10), 4)
    boot = drawn(300, days)
    seen = (np.arange(40) % 8 < 4).astype(float)[:, None]
    found = Detection(np.full((40, 1), 7.0), seen, np.full(40, 9.0))
    assert boot.percentiles(found, [0.05])[0] == (7.0, 7.0, 7.0)
    assert boot.percentiles(found, [0.95])[0] == (None, None, None)
    assert boot.percentiles(found, [0.5])[0] == (7.0, 7.0, None)
    nothing = Detection(np.zeros((40, 1)), np.zeros((40, 1)), np.full(40, 9.0))
    assert boot.percentiles(nothing, [0.5])[0] == (None, None, None)


def test_about_nine_intervals_in_ten_hold_the_mean_of_observations_that_share_their_days() -> None:
    for length in (9, 56):
        held, runs = 0, 400
        for run in range(runs):
            random = child(5, run, length)
            days = np.sort(MONDAY + random.integers(0, length, 300))
            by_day = random.normal(size=length)
            each = 10 + by_day[days - MONDAY] + random.normal(size=300)
            low, high = DayBootstrap.of(days, 400, random).mean(each).interval
            held += low <= 10 <= high
        assert 0.86 <= held / runs <= 0.94
