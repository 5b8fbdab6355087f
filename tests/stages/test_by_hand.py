"""What a person sets by hand is taken; what does not fit is said so."""

import math

import numpy as np
import pytest

from pbm.errors import InputError
from pbm.methods.candidates import WHOLE_GRID, preparations
from pbm.methods.chain import Preparation
from pbm.methods.seeds import child
from pbm.records.plan import Admit
from pbm.stages.by_hand import NOTHING_BY_HAND, ByHand

SYMMETRIC = np.rint(np.random.default_rng(1).normal(139, 4, 2_000))
SKEWED = np.round(np.random.default_rng(2).gamma(2, 10, 2_000) + 1, 1)


def choices(x: np.ndarray, step: float) -> list[Preparation]:
    return preparations(x, step, child(1, "transform"))


def test_nothing_by_hand_leaves_every_candidate() -> None:
    given = choices(SKEWED, 0.1)
    assert NOTHING_BY_HAND.preparations(given) == given
    assert {c.statistic for c in NOTHING_BY_HAND.candidates(given, 1_000, WHOLE_GRID.shift)} == {
        family.statistic for family in WHOLE_GRID.shift
    }


def test_truncation_limits_by_hand_replace_all_others_on_every_transform() -> None:
    chosen = ByHand(admit=Admit(low=5, mode="winsorize")).preparations(choices(SKEWED, 0.1))
    assert {(p.low, p.high, p.winsorize) for p in chosen} == {(5.0, math.inf, True)}
    assert [p.transform for p in chosen] == ["none", "log", "boxcox"]


def test_a_logarithm_by_hand_is_taken_even_where_results_are_not_skewed() -> None:
    assert {p.transform for p in ByHand(transform="log").preparations(choices(SYMMETRIC, 1.0))} == {"log"}


def test_a_box_cox_by_hand_is_refused_where_no_lambda_is_estimated() -> None:
    with pytest.raises(InputError, match="no Box-Cox transform"):
        ByHand(transform="boxcox").preparations(choices(SYMMETRIC, 1.0))


def test_a_weight_by_hand_need_not_be_among_those_searched() -> None:
    (candidate,) = ByHand(statistic="ewma", parameter=0.123).candidates([Preparation()], 1_000, WHOLE_GRID.shift)
    assert (candidate.statistic, candidate.parameter) == ("ewma", 0.123)


def test_a_statistic_by_hand_leaves_its_parameter_to_the_search() -> None:
    found = ByHand(statistic="mean").candidates([Preparation()], 1_000, WHOLE_GRID.shift)
    (family,) = (one for one in WHOLE_GRID.shift if one.statistic == "mean")
    assert [c.parameter for c in found] == list(family.parameters)


def test_a_window_by_hand_leaves_the_second_parameter_to_the_search() -> None:
    found = ByHand(statistic="batch", parameter=33).candidates([Preparation()], 1_000, WHOLE_GRID.shift)
    assert [(c.parameter, dict(c.more)["exponent"]) for c in found] == [(33, 0.5), (33, 1.0)]


def test_a_statistic_by_hand_says_nothing_of_the_monitor_that_does_not_use_it() -> None:
    admit = Admit(low=125)
    given = ByHand(admit=admit, statistic="sd", parameter=50)
    assert given.among(WHOLE_GRID.imprecision) == given
    assert given.among(WHOLE_GRID.shift) == ByHand(admit=admit)


@pytest.mark.parametrize(
    ("statistic", "parameter", "said"),
    [
        (None, 0.05, "goes with --statistic"),
        ("ewma", 50, "a weight above 0 and at most 1, not 50"),
        ("mean", 0.5, "a window of at least 2 results, not 0.5"),
        ("mean", 20.5, "a window of at least 2"),
        ("cusum", 12, "a reference of at least 0 SD and below 10, not 12"),
        ("sum", None, '"sum" is not a statistic'),
    ],
)
def test_what_does_not_fit_together_is_refused(statistic: str | None, parameter: float | None, said: str) -> None:
    with pytest.raises(InputError, match=said):
        ByHand(statistic=statistic, parameter=parameter)
