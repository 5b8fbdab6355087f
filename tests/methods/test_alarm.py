"""The alarm machine against a naive one, on paths with gaps, one-sided limits, and jumps from one side to the other."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.alarm import Limits, count_episodes, episodes, episodes_before, judge
from tests import naive

VALUE = st.one_of(st.integers(-12, 12).map(lambda k: k / 2), st.just(math.nan), st.floats(-8, 8))
PATH = st.lists(VALUE, max_size=60)
LIMITS = st.builds(
    Limits,
    st.sampled_from([-math.inf, -4.0, -3.0, -0.5]),
    st.sampled_from([math.inf, 4.0, 2.5, 0.5]),
    st.sampled_from([0.0, 0.25]),
    st.sampled_from([0.1, 0.5, 0.9]),
)


@given(PATH, LIMITS)
def test_episodes_are_those_of_the_naive_machine(path: list[float], limits: Limits) -> None:
    found = episodes(np.array(path), limits)
    ours = list(zip(found.at.tolist(), found.side.tolist(), found.peak.tolist(), strict=True))
    assert ours == naive.alarms(path, *limits)
    assert count_episodes(np.array(path), limits) == len(found) == len(ours)


@given(PATH, LIMITS)
def test_the_machine_stepped_live_opens_the_same_episodes(path: list[float], limits: Limits) -> None:
    episode, opened = 0, []
    before = []
    for i, s in enumerate(path):
        before.append(episode)
        after = judge(episode, s, *limits)
        if episode == 0 and after != 0:
            opened.append((i, after))
        episode = after
    found = episodes(np.array(path), limits)
    assert opened == list(zip(found.at.tolist(), found.side.tolist(), strict=True))
    at = np.arange(len(path))
    assert episodes_before(np.array(path), limits, at).tolist() == before


@given(PATH, LIMITS, st.data())
def test_the_episode_at_an_onset_is_the_one_open_then(path: list[float], limits: Limits, data: st.DataObject) -> None:
    at = sorted(data.draw(st.lists(st.integers(0, len(path)), max_size=8)))
    every = [0, *(judged for judged in _after_each(path, limits))]
    assert episodes_before(np.array(path), limits, np.array(at, dtype=np.int64)).tolist() == [every[i] for i in at]


def _after_each(path: list[float], limits: Limits) -> list[int]:
    episode, out = 0, []
    for s in path:
        episode = judge(episode, s, *limits)
        out.append(episode)
    return out


def test_a_jump_from_one_side_to_the_other_is_one_episode_until_the_band_is_met() -> None:
    found = episodes(np.array([0.0, 5.0, -5.0, -1.6, 1.5, -3.5]), Limits(-3.0, 3.0, 0.0, 0.5))
    assert found.at.tolist() == [1, 5]
    assert found.side.tolist() == [1, -1]
    assert found.peak.tolist() == [5.0, -3.5]


@pytest.mark.parametrize("side", [-1, 1])
def test_a_one_sided_monitor_is_never_opened_from_the_other_side(side: int) -> None:
    limits = Limits(-math.inf, 3.0, 0.0, 0.5) if side > 0 else Limits(-3.0, math.inf, 0.0, 0.5)
    path = side * np.array([-1e9, 3.5, 2.0, 1.4, 3.5, -1e9, 4.0])
    found = episodes(path, limits)
    assert found.at.tolist() == [1, 4, 6]
    assert (found.side == side).all()


def test_a_value_on_a_limit_is_inside_and_a_value_on_the_band_arms() -> None:
    limits = Limits(-3.0, 3.0, 0.0, 0.5)
    assert judge(0, 3.0, *limits) == 0 == judge(0, -3.0, *limits)
    assert judge(1, 1.5, *limits) == 0 == judge(-1, -1.5, *limits)
    assert judge(1, 1.5000001, *limits) == 1
    assert judge(1, math.nan, *limits) == 1 and judge(0, math.nan, *limits) == 0


def test_a_gap_inside_an_episode_hides_none_of_its_furthest_value() -> None:
    path = np.array([4.0, math.nan, 6.0, math.nan, 5.0, math.nan, 0.0, -4.0, math.nan, -7.0, math.nan])
    found = episodes(path, Limits(-3.0, 3.0, 0.0, 0.5))
    assert found.peak.tolist() == [6.0, -7.0]


@given(PATH, LIMITS)
def test_wider_limits_open_no_episode_outside_those_of_narrower_ones(path: list[float], limits: Limits) -> None:
    """The count itself may rise with a wider limit, since it arms sooner; but each of its episodes begins inside a narrower one's."""
    wider = limits._replace(low=limits.low - 1, high=limits.high + 1)
    open_narrow = np.array([0, *_after_each(path, limits)])
    assert all(open_narrow[i + 1] != 0 for i in episodes(np.array(path), wider).at)
