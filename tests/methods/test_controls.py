"""Chance of passing control events: exact against simulated, and what must hold whatever the numbers."""

from itertools import pairwise
from typing import Literal

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.methods import controls
from pbm.methods.controls import Rules, rejection_probability, run_length, survival
from pbm.methods.seeds import child
from tests.naive import first_rejected

COMMON = ("1-3s", "2-2s", "R-4s", "4-1s", "10x")
ONE_EACH = np.array([1, 1])


def simulated(monkeypatch: pytest.MonkeyPatch) -> None:
    """From here on no rule set is followed by the exact chain."""
    monkeypatch.setattr(controls, "chain_of", lambda rules, repeats: None)


@pytest.mark.parametrize("rules", [("1-3s", "2-2s", "R-4s"), ("2of3-2s", "R-4s-opposite", "3-1s"), COMMON, ("R-4s",)])
@pytest.mark.parametrize("repeats", [(1,), (1, 1), (2, 1), (1, 1, 1)])
def test_the_exact_chain_agrees_with_simulation(
    monkeypatch: pytest.MonkeyPatch, rules: tuple[str, ...], repeats: tuple[int, ...]
) -> None:
    bias = np.linspace(0.2, 1.1, 8)[:, None] * np.linspace(1.0, -0.5, len(repeats))[None, :]
    exact = survival(Rules.parse(rules), bias, 1.3, np.array(repeats), child(1, "controls"))
    simulated(monkeypatch)
    runs = survival(Rules.parse(rules), bias, 1.3, np.array(repeats), child(1, "controls"), 60_000)
    assert runs.error[0] == 0.0 and (runs.error[1:] > 0).all()
    assert (np.abs(exact.passed - runs.passed)[1:] <= 3.9 * runs.error[1:]).all()


@pytest.mark.parametrize("start", ["fresh", "accepted"])
def test_the_exact_run_length_agrees_with_simulation(
    monkeypatch: pytest.MonkeyPatch, start: Literal["fresh", "accepted"]
) -> None:
    bias = np.array([0.8, 0.3])
    exact = run_length(Rules.parse(COMMON), bias, 1.0, ONE_EACH, start)
    simulated(monkeypatch)
    runs = run_length(Rules.parse(COMMON), bias, 1.0, ONE_EACH, start, child(2, "controls"), 40_000)
    assert exact.error == 0.0
    assert abs(exact.value - runs.value) <= 3.5 * runs.error


def test_the_run_length_agrees_with_the_naive_twin() -> None:
    random = child(3, "naive")
    found = []
    for _ in range(1000):
        events = [[(0, a), (1, b)] for a, b in random.normal(1.0, 1.0, (60, 2))]
        first = first_rejected(("1-3s", "2of3-2s", "R-4s", "4-1s"), events)
        assert first is not None
        found.append(first + 1)
    exact = run_length(Rules.parse(("1-3s", "2of3-2s", "R-4s", "4-1s")), np.ones(2), 1.0, ONE_EACH).value
    assert abs(np.mean(found) - exact) <= 3.5 * np.std(found) / np.sqrt(len(found))


def test_the_run_length_is_the_sum_of_the_chances_of_passing() -> None:
    rules, bias = Rules.parse(("1-3s", "2-2s", "R-4s")), np.array([1.5, 1.0])
    passed = survival(rules, np.tile(bias, (200, 1)), 1.0, ONE_EACH).passed
    assert run_length(rules, bias, 1.0, ONE_EACH, "accepted").value == pytest.approx(passed.sum(), rel=1e-12)


def test_rules_on_one_event_multiply_over_events_and_levels() -> None:
    bias = np.array([[0.5, 2.0], [1.0, 3.0], [0.0, 0.0]])
    found = survival(Rules.parse(["1-3s"]), bias, 1.0, np.array([2, 1]))
    each = [1 - rejection_probability(Rules.parse(["1-3s"]), b, 1.0, np.array([2, 1])).value for b in bias]
    assert found.passed == pytest.approx(np.append(1.0, np.cumprod(each)), rel=1e-13)
    assert (found.error == 0).all()


def test_levels_with_different_shifts_can_break_the_range_rule() -> None:
    apart = rejection_probability(Rules.parse(["R-4s"]), np.array([2.0, -2.0]), 1.0, ONE_EACH).value
    assert apart == pytest.approx(0.5, abs=1e-7)


def test_an_accepted_history_makes_the_first_event_more_likely_to_reject_than_an_event_alone() -> None:
    bias = np.array([1.0, 1.0])
    alone = rejection_probability(Rules.parse(COMMON, scope="event"), bias, 1.0, ONE_EACH).value
    assert rejection_probability(Rules.parse(COMMON), bias, 1.0, ONE_EACH).value > alone + 0.01


def test_the_exact_answer_does_not_touch_the_generator() -> None:
    random = child(4, "untouched")
    survival(Rules.parse(COMMON), np.ones((3, 2)), 1.0, ONE_EACH, random)
    assert random.random() == child(4, "untouched").random()


def test_the_same_generator_gives_figures_that_vary_smoothly_over_sizes(monkeypatch: pytest.MonkeyPatch) -> None:
    """Between neighbouring sizes the simulated difference is far nearer to the exact one than independent runs would bring it."""

    def chances(size: float) -> controls.Survival:
        return survival(Rules.parse(COMMON), np.full((6, 2), size), 1.0, ONE_EACH, child(5, "same"))

    exact = chances(1.0).passed - chances(1.001).passed
    simulated(monkeypatch)
    one, next_one = chances(1.0), chances(1.001)
    assert (np.abs(one.passed - next_one.passed - exact)[1:] < 0.25 * one.error[1:]).all()
    assert all((a.passed >= b.passed).all() for a, b in pairwise(chances(size) for size in np.linspace(0.5, 1.5, 6)))


def test_runs_rejected_early_do_not_change_the_figures_of_earlier_events(monkeypatch: pytest.MonkeyPatch) -> None:
    simulated(monkeypatch)
    short = survival(Rules.parse(COMMON), np.full((3, 2), 2.0), 1.0, ONE_EACH, child(6, "same")).passed
    long = survival(Rules.parse(COMMON), np.full((40, 2), 2.0), 1.0, ONE_EACH, child(6, "same")).passed
    np.testing.assert_array_equal(short, long[:4])
    assert long[-1] == 0.0


def test_rules_on_more_measurements_than_the_chain_can_hold_are_simulated() -> None:
    found = survival(Rules.parse(COMMON), np.ones((4, 3)), 1.0, np.array([2, 2, 2]), child(7, "many"), 2000)
    assert (found.error[1:] > 0).all()
    with pytest.raises(ValueError, match="need a simulation"):
        survival(Rules.parse(COMMON), np.ones((4, 3)), 1.0, np.array([2, 2, 2]))


def test_without_rules_everything_passes_and_nothing_is_ever_rejected() -> None:
    assert survival(Rules(()), np.full((3, 1), 9.0), 1.0, np.array([1])).passed.tolist() == [1, 1, 1, 1]
    assert run_length(Rules(()), np.array([9.0]), 1.0, np.array([1])).value == np.inf
    assert run_length(Rules.parse(["R-4s"]), np.array([9.0]), 1.0, np.array([1])).value == np.inf


def test_rules_that_no_history_passes_are_refused() -> None:
    with pytest.raises(ValueError, match="reject every in-control event"):
        survival(Rules.parse(["2x"]), np.zeros((1, 2)), 1.0, ONE_EACH)


@pytest.mark.parametrize(
    ("bias", "multiple", "repeats"),
    [
        (np.zeros((2, 2)), 1.0, [1]),
        (np.zeros(2), 1.0, [1, 1]),
        (np.zeros((2, 1)), 1.0, [0]),
        (np.zeros((2, 0)), 1.0, []),
        (np.full((2, 1), np.nan), 1.0, [1]),
        (np.zeros((2, 1)), 0.0, [1]),
    ],
)
def test_what_does_not_fit_together_is_refused(bias: np.ndarray, multiple: float, repeats: list[int]) -> None:
    with pytest.raises(ValueError, match="found"):
        survival(Rules.parse(["1-3s"]), bias, multiple, np.array(repeats, dtype=np.int64))


notations = st.sampled_from(["1-2.5s", "1-3s", "2-2s", "2of3-2s", "3-1s", "4-1s", "8x", "R-4s", "R-4s-opposite"])
shifts = st.tuples(st.floats(-4, 4), st.floats(-4, 4)).map(np.array)
multiples = st.floats(0.5, 3)


@settings(max_examples=60, deadline=None)
@given(st.lists(notations, min_size=1, max_size=3, unique=True), notations, shifts, multiples)
def test_more_rules_never_reject_less(some: list[str], another: str, bias: np.ndarray, multiple: float) -> None:
    """Of an event judged on its own. From an accepted history a further rule also selects calmer histories, so there it need not hold."""
    fewer, more = (
        rejection_probability(Rules.parse(chosen, scope="event"), bias, multiple, ONE_EACH).value
        for chosen in (some, [*some, another])
    )
    assert more >= fewer - 1e-12


@settings(max_examples=60, deadline=None)
@given(st.lists(notations, min_size=1, max_size=3, unique=True), shifts, multiples)
def test_the_chance_of_passing_falls_with_every_event(rules: list[str], bias: np.ndarray, multiple: float) -> None:
    passed = survival(Rules.parse(rules), np.tile(bias, (5, 1)), multiple, ONE_EACH).passed
    assert passed[0] == 1.0 and (np.diff(passed) <= 0).all() and passed[-1] >= 0


@settings(max_examples=60, deadline=None)
@given(st.lists(notations, min_size=1, max_size=3, unique=True), shifts, multiples)
def test_both_signs_of_a_fault_are_as_likely_to_be_found(rules: list[str], bias: np.ndarray, multiple: float) -> None:
    up, down = (
        survival(Rules.parse(rules), np.tile(sign * bias, (3, 1)), multiple, ONE_EACH).passed for sign in (1, -1)
    )
    assert up == pytest.approx(down, abs=1e-12)


@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.sampled_from(["1-2s", "1-3s", "2-2s", "2of3-2s", "3-1s"]), min_size=1, max_size=3, unique=True),
    st.floats(0, 5),
    st.floats(0, 1),
    st.integers(1, 3),
)
def test_a_larger_shift_of_all_levels_is_found_more_often(
    rules: list[str], shift: float, more: float, levels: int
) -> None:
    """True of rules on one side's count; not of R-4s-opposite, which a common shift makes rarer."""
    less, greater = (
        rejection_probability(
            Rules.parse(rules, scope="event"), np.full(levels, size), 1.0, np.ones(levels, dtype=np.int64)
        )
        for size in (shift, shift + more)
    )
    assert greater.value >= less.value - 1e-12


@settings(max_examples=40, deadline=None)
@given(st.lists(notations, min_size=1, max_size=3, unique=True), st.floats(1, 3), st.floats(0, 1))
def test_more_imprecision_without_a_shift_is_found_more_often(rules: list[str], multiple: float, more: float) -> None:
    chances = [
        rejection_probability(Rules.parse(rules, scope="event"), np.zeros(2), m, ONE_EACH).value
        for m in (multiple, multiple + more)
    ]
    assert chances[1] >= chances[0] - 1e-12


@pytest.mark.parametrize("rules", [("1-3s",), ("1-3s", "2-2s"), ("1-3s", "2-2s", "R-4s"), COMMON])
@pytest.mark.parametrize("share", [0.1, 0.5])
def test_a_sporadic_fault_is_met_by_each_control_measurement_for_itself(rules: tuple[str, ...], share: float) -> None:
    """Against the naive twin, on runs whose in-control history passed."""
    random, bias = child(8, "sporadic", share), np.array([3.0, 2.0])
    exact = survival(Rules.parse(rules), np.tile(bias, (3, 1)), 1.0, ONE_EACH, share=share).passed
    runs, still = 0, np.zeros(4)
    while runs < 1200:
        calm = random.standard_normal((10, 2))
        faulty = random.standard_normal((3, 2)) + np.where(random.random((3, 2)) < share, bias, 0.0)
        events = [[(0, a), (1, b)] for a, b in np.concatenate([calm, faulty])]
        first = first_rejected(rules, events)
        if first is None or first >= 10:
            runs += 1
            still[: 4 if first is None else first - 9] += 1
    passed = still / runs
    assert (np.abs(passed - exact) <= 3.9 * np.sqrt(exact * (1 - exact) / runs)).all()


@pytest.mark.parametrize("repeats", [(1,), (1, 1), (2, 1)])
def test_exact_and_simulated_chances_agree_under_a_sporadic_fault(
    monkeypatch: pytest.MonkeyPatch, repeats: tuple[int, ...]
) -> None:
    bias = np.full((6, len(repeats)), 2.5)
    rules = Rules.parse(("1-3s", "2-2s", "R-4s", "4-1s"))
    exact = survival(rules, bias, 1.0, np.array(repeats), share=0.3)
    simulated(monkeypatch)
    runs = survival(rules, bias, 1.0, np.array(repeats), child(9, "sporadic"), 60_000, share=0.3)
    assert (exact.error == 0).all() and (runs.error[1:] > 0).all()
    assert (np.abs(exact.passed - runs.passed)[1:] <= 3.9 * runs.error[1:]).all()


def test_a_fault_met_always_is_the_shift_and_one_met_hardly_ever_is_none() -> None:
    rules, bias = Rules.parse(COMMON), np.full((4, 2), 2.0)
    plain = survival(rules, bias, 1.0, ONE_EACH).passed
    assert (survival(rules, bias, 1.0, ONE_EACH, share=1.0).passed == plain).all()
    assert survival(rules, bias, 1.0, ONE_EACH, share=1 - 1e-9).passed == pytest.approx(plain, abs=1e-7)
    assert survival(rules, bias, 1.0, ONE_EACH, share=1e-9).passed == pytest.approx(
        survival(rules, 0 * bias, 1.0, ONE_EACH).passed, abs=1e-7
    )
