"""The wandering of an analyser's level: seen where it is there, small where it is not, and none where nothing can be told."""

import numpy as np
import pytest

from pbm.methods.level import level_wandering
from pbm.methods.seeds import child

DAYS, A_DAY = 200, 50


def values(lots: float, by_day: float, seed: int, lasting: int = 25) -> tuple[np.ndarray, np.ndarray]:
    """Values of SD 1 on levels that change with the day and with lots that last so many days."""
    random = child(seed, lots, by_day)
    level = by_day * random.normal(size=DAYS) + np.repeat(lots * random.normal(size=DAYS // lasting), lasting)
    days = np.repeat(np.arange(DAYS), A_DAY)
    return level[days] + random.normal(size=len(days)), days


@pytest.mark.parametrize("lots", [0.2, 0.5])
@pytest.mark.parametrize("by_day", [0.0, 0.1])
def test_lots_are_seen_on_average_over_histories(lots: float, by_day: float) -> None:
    found = [level_wandering(*values(lots, by_day, seed)) ** 2 for seed in range(40)]
    assert float(np.sqrt(np.mean(found))) == pytest.approx(lots, rel=0.25)


def test_days_that_differ_by_chance_alone_are_hardly_taken_for_wandering() -> None:
    found = [level_wandering(*values(0.0, 0.3, seed)) for seed in range(40)]
    assert float(np.mean(found)) < 0.3 / np.sqrt(10), "less than the level of ten such days varies anyway"


def test_a_drop_in_level_from_one_half_to_the_other_is_seen() -> None:
    z, days = values(0.0, 0.0, 1)
    assert level_wandering(z + (days >= DAYS // 2), days) > 0.4


def test_results_that_were_dropped_do_not_count() -> None:
    z, days = values(0.3, 0.1, 2)
    some = np.where(np.arange(len(z)) % 3 == 0, np.nan, z)
    kept = ~np.isnan(some)
    assert level_wandering(some, days) == level_wandering(z[kept], days[kept])


@pytest.mark.parametrize(
    "days", [np.zeros(50), np.arange(50) // 25, np.arange(50) // 2], ids=["a day", "two days", "25 days"]
)
def test_fewer_than_three_blocks_tell_nothing(days: np.ndarray) -> None:
    z = child(3, "few").normal(size=50)
    assert (level_wandering(z, days.astype(np.int64)) == 0) == (days[-1] < 24)


def test_nothing_and_the_same_value_for_ever_have_no_wandering() -> None:
    days = np.arange(100)
    assert level_wandering(np.full(100, np.nan), days) == 0 == level_wandering(np.full(100, 5.0), days)
