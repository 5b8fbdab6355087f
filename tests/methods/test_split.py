"""Training days first, held-out days after."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.split import first_held_out_day, split_at

DAYS = st.lists(st.integers(0, 200), min_size=2, max_size=60).map(sorted).filter(lambda d: d[0] < d[-1])


@given(DAYS)
def test_two_thirds_of_the_days_with_results_train_and_all_later_ones_are_held_out(days: list[int]) -> None:
    distinct = sorted(set(days))
    split = split_at(np.array(days), first_held_out_day(np.array(days)))
    trained, held_out = set(days[: split.at]), set(days[split.at :])
    assert max(trained) < min(held_out)
    assert len(trained) == 2 * len(distinct) // 3
    assert split.training_days == max(trained) - min(trained) + 1
    assert split.held_out_days == max(held_out) - min(held_out) + 1


def test_the_share_is_exact_for_any_number_of_days() -> None:
    assert all(first_held_out_day(np.arange(n)) == 2 * n // 3 for n in range(2, 2000))


@given(DAYS, st.integers(-5, 210))
def test_a_split_at_any_day_puts_that_day_into_the_held_out_part(days: list[int], first: int) -> None:
    split = split_at(np.array(days), first)
    assert all(day < first for day in days[: split.at]) and all(day >= first for day in days[split.at :])
