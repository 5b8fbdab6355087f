"""One master seed, named children: what a child draws depends on its name alone."""

import itertools

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import kstest

from pbm.methods.seeds import child
from pbm.records.stream import StreamName

NAMES = st.lists(st.one_of(st.text(max_size=8), st.integers(0, 99)), max_size=3)


def drawn(master: int, *names: object) -> list[int]:
    return child(master, *names).integers(2**62, size=4).tolist()  # type: ignore[no-any-return]


@given(st.integers(0, 2**40), NAMES)
def test_the_same_name_gives_the_same_numbers_whatever_was_drawn_before(master: int, names: list[object]) -> None:
    first = drawn(master, *names)
    child(master, "another").random(7)
    child(master + 1, *names).random(3)
    assert drawn(master, *names) == first


def test_every_name_and_every_master_seed_has_numbers_of_its_own() -> None:
    names = [("a",), ("b",), ("a", "b"), ("ab",), ("b", "a"), ("a", 1), ("a", 11), ("a", 1, 1), ()]
    every = [tuple(drawn(master, *name)) for master, name in itertools.product(range(20), names)]
    assert len(set(every)) == len(every)


def test_children_are_pinned() -> None:
    """A plan tells its seed: the same seed must give the same plan in a later version too."""
    assert child(1, "sodium@line-2", "onsets", 250).integers(10**6, size=3).tolist() == [382477, 947046, 526831]


def test_a_stream_name_counts_as_its_text() -> None:
    assert drawn(1, StreamName("sodium", "line-2"), "limits") == drawn(1, "sodium@line-2", "limits")


def test_children_are_independent_of_each_other() -> None:
    """First numbers of many children are uniform, and neighbours do not go together."""
    firsts = np.array([child(7, "stream", i).random() for i in range(4000)])
    assert kstest(firsts, "uniform").pvalue > 0.001
    assert abs(np.corrcoef(firsts[1:], firsts[:-1])[0, 1]) < 0.06
