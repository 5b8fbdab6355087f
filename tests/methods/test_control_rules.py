"""Control rules: notation, and judging of events as the definitions say."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.methods.control_chain import chain_of
from pbm.methods.control_judge import Judge, accepts, still_needed
from pbm.methods.control_rules import Rules, parse_rule
from pbm.methods.jit import compiled
from tests.naive import first_rejected

NOTATIONS = (
    "1-2s",
    "1-2.5s",
    "1-3s",
    "1-3.5s",
    "2-2s",
    "2of3-2s",
    "3of5-1.5s",
    "3-1s",
    "4-1s",
    "4of5-1s",
    "8x",
    "10x",
    "R-4s",
    "R-4s-opposite",
)


@pytest.mark.parametrize(
    ("notation", "kind", "limit", "needed", "window"),
    [
        ("1-3s", "count", 3.0, 1, 1),
        ("1-2.5s", "count", 2.5, 1, 1),
        ("2of3-2s", "count", 2.0, 2, 3),
        ("4-1s", "count", 1.0, 4, 4),
        ("10x", "count", 0.0, 10, 10),
        ("R-4s", "range", 4.0, 0, 0),
        ("R-4s-opposite", "opposite", 2.0, 0, 0),
        (" 1-3s ", "count", 3.0, 1, 1),
    ],
)
def test_trade_notation_is_understood(notation: str, kind: str, limit: float, needed: int, window: int) -> None:
    rule = parse_rule(notation)
    assert (rule.kind, rule.limit, rule.needed, rule.window) == (kind, limit, needed, window)
    assert rule.title.startswith(rule.notation)


def test_the_title_of_r_4s_says_which_reading_it_is() -> None:
    assert "range" in parse_rule("R-4s").title and "default reading" in parse_rule("R-4s").title
    assert "another beyond -2 SD" in parse_rule("R-4s-opposite").title


@pytest.mark.parametrize("notation", ["R4s", "2-2", "13s", "2of3-2", "x10", "", "1-3s,2-2s", "-1-3s", "R-4s-other"])
def test_what_is_not_notation_is_refused_with_what_was_found_and_what_is_understood(notation: str) -> None:
    with pytest.raises(ValueError, match="is not understood; understood are k-Ls") as refused:
        parse_rule(notation)
    assert repr(notation) in str(refused.value)


@pytest.mark.parametrize("notation", ["3of2-2s", "0of2-2s", "0-2s", "1x", "0x", "51x"])
def test_counts_that_make_no_sense_are_refused(notation: str) -> None:
    with pytest.raises(ValueError, match="makes no sense: expected a count"):
        parse_rule(notation)


@pytest.mark.parametrize("notation", ["2-0s", "R-0s", "R-0s-opposite", "2of3-0.0s"])
def test_a_limit_of_zero_is_refused(notation: str) -> None:
    with pytest.raises(ValueError, match="limit of 0 SD"):
        parse_rule(notation)


def passes(notations: list[str], events: list[list[float]], repeats: list[int], scope: str = "across") -> list[bool]:
    """Events up to the first rejected one, judged by the law as plain Python."""
    judge = Judge.of(Rules.parse(notations, scope="event" if scope == "event" else "across"), np.array(repeats))
    state = np.zeros(judge.state_size, dtype=np.int64)
    found: list[bool] = []
    for event in events:
        if scope == "event":
            state[:] = 0
        found.append(bool(accepts(state, np.array(event), *judge.law)))
        if not found[-1]:
            break
    return found


def test_a_rule_counts_across_events_on_each_level() -> None:
    assert passes(["2-2s"], [[2.1, 0.0], [2.1, 0.0]], [1, 1]) == [True, False]


def test_a_rule_counts_across_levels_within_an_event() -> None:
    assert passes(["2-2s"], [[0.0, 0.0], [2.1, 2.1]], [1, 1]) == [True, False]


def test_a_rule_counts_along_all_measurements_across_levels_and_events() -> None:
    assert passes(["2-2s"], [[0.0, 2.1], [2.1, 0.0]], [1, 1]) == [True, False]


def test_beyond_on_opposite_sides_does_not_count_together() -> None:
    assert passes(["2-2s"], [[2.1, -2.1], [0.0, 0.0], [-2.1, 2.1]], [1, 1]) == [True, True, True]


def test_within_event_scope_forgets_earlier_events() -> None:
    assert passes(["2-2s"], [[2.1, 0.0], [2.1, 0.0]], [1, 1], "event") == [True, True]


def test_a_range_never_reaches_over_events() -> None:
    assert passes(["R-4s", "R-4s-opposite"], [[2.9, 2.9], [-2.9, -2.9]], [1, 1]) == [True, True]


def test_the_two_readings_of_r_4s_differ() -> None:
    assert passes(["R-4s"], [[3.5, -0.6]], [1, 1]) == [False]
    assert passes(["R-4s-opposite"], [[3.5, -0.6]], [1, 1]) == [True]


def test_a_measurement_on_a_limit_is_inside_it() -> None:
    assert passes(["1-3s", "R-4s", "2-2s"], [[3.0, -1.0], [2.0, 2.0]], [1, 1]) == [True, True]


@st.composite
def sequences(draw: st.DrawFn, rules: int = 4, levels: int = 3) -> tuple[list[str], list[int], list[list[float]]]:
    notations = draw(st.lists(st.sampled_from(NOTATIONS), min_size=1, max_size=rules, unique=True))
    repeats = draw(st.lists(st.integers(1, 2), min_size=1, max_size=levels))
    shift = draw(st.sampled_from([0.0, 0.7, -1.5]))
    random = np.random.default_rng(draw(st.integers(0, 2**32)))
    return notations, repeats, (random.standard_normal((25, sum(repeats))) * 1.2 + shift).tolist()


def levelled(events: list[list[float]], repeats: list[int]) -> list[list[tuple[int, float]]]:
    levels = [level for level, times in enumerate(repeats) for _ in range(times)]
    return [list(zip(levels, event, strict=True)) for event in events]


@settings(max_examples=300, deadline=None)
@given(sequences(), st.sampled_from(["across", "event"]))
def test_judging_agrees_with_the_naive_twin(case: tuple[list[str], list[int], list[list[float]]], scope: str) -> None:
    notations, repeats, events = case
    found = passes(notations, events, repeats, scope)
    expected = first_rejected(notations, levelled(events, repeats), within_event=scope == "event")
    assert (found.index(False) if False in found else None) == expected


@settings(max_examples=100, deadline=None)
@given(sequences(rules=3, levels=2))
def test_the_chain_follows_events_as_the_naive_twin_judges_them(
    case: tuple[list[str], list[int], list[list[float]]],
) -> None:
    """The chain merges states that share every future; a wrong merger would show here."""
    notations, repeats, events = case
    by_zone = [notation for notation in notations if notation != "R-4s"]
    chain = chain_of(Rules.parse(by_zone), tuple(repeats))
    if chain is None:
        return
    expected = first_rejected(by_zone, levelled(events, repeats))
    zones = len(chain.edges) - 1
    state, found = 0, None
    for k, event in enumerate(events):
        place = np.searchsorted(chain.edges, event) - 1
        inside = bool(((place >= 0) & (place < zones)).all())
        state = int(chain.following[state, np.ravel_multi_index(tuple(place), (zones,) * len(place))]) if inside else -1
        if state < 0:
            found = k
            break
    assert found == expected


@given(sequences())
@settings(max_examples=20, deadline=None)
def test_the_compiled_law_is_the_plain_one(case: tuple[list[str], list[int], list[list[float]]]) -> None:
    notations, repeats, events = case
    judge = Judge.of(Rules.parse(notations), np.array(repeats))
    plain, fast = np.zeros((2, judge.state_size), dtype=np.int64)
    for event in events:
        z = np.array(event)
        passed = accepts(plain, z, *judge.law)
        assert compiled(accepts)(fast, z, *judge.law) == passed
        if not passed:
            break
        np.testing.assert_array_equal(plain, fast)


@given(st.integers(2, 6), st.integers(2, 5), st.integers(0, 2**6 - 1), st.lists(st.booleans(), min_size=6, max_size=12))
def test_what_a_window_forgets_never_matters(window: int, needed: int, bits: int, future: list[bool]) -> None:
    needed = min(needed, window)
    full, kept = bits % 2**window, still_needed(bits % 2**window, needed, window)
    for beyond in future:
        full, kept = ((full << 1) | beyond) % 2**window, ((kept << 1) | beyond) % 2**window
        assert (full.bit_count() >= needed and beyond) == (kept.bit_count() >= needed and beyond)
