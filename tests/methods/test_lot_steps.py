"""Steps between reagent lots: their size, their intervals, and what they do not claim."""

import numpy as np

from pbm.methods.lot_steps import lot_steps
from pbm.methods.seeds import child

DAYS, PER_DAY = 90, 40


def history(steps: tuple[float, ...], seed: int = 1) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Results whose days share a level of their own; each lot lasts as long as the others."""
    random = child(seed, "lots")
    day = np.repeat(np.arange(DAYS), PER_DAY)
    lot = day * len(steps) // DAYS
    level = random.normal(0, 0.4, DAYS)[day] + np.cumsum(steps)[lot]
    return 140 + level + random.normal(0, 3, len(day)), lot, day


def test_the_step_is_the_difference_of_the_means_of_two_lots_in_order_of_first_use() -> None:
    x, lot, day = history((0.0, 2.0, -1.0))
    renamed = np.array([7, 0, 3])[lot]  # numbers tell no order
    first, second, third = lot_steps(x, renamed, day, child(2, "draws"))
    assert [one.code for one in (first, second, third)] == [7, 0, 3]
    assert first.step is None and first.interval is None
    assert second.step == x[lot == 1].mean() - x[lot == 0].mean()
    assert third.step == x[lot == 2].mean() - x[lot == 1].mean()
    assert second.at.tolist() == np.flatnonzero(lot == 1).tolist()


def test_the_interval_holds_the_true_step_in_about_nine_of_ten_histories() -> None:
    inside = 0
    for seed in range(100):
        _, second = lot_steps(*history((0.0, 1.0), seed), child(seed, "draws"))
        assert second.interval is not None
        inside += second.interval[0] <= 1.0 <= second.interval[1]
    assert 82 <= inside <= 97


def test_results_without_a_lot_take_no_part_and_a_lot_of_one_day_has_no_interval() -> None:
    x, lot, day = history((0.0, 2.0))
    lot[day < 10] = -1
    lot[day == 89] = 5
    first, second, last = lot_steps(x, lot, day, child(2, "draws"))
    assert first.at[0] == 10 * PER_DAY
    assert second.interval is not None
    assert last.step is not None and last.interval is None
    assert lot_steps(x, np.full(len(x), -1), day, child(2, "draws")) == []
