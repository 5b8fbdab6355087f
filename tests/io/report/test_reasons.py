"""The search is laid out by truncation with the choice framed; a plan that was edited is said to be."""

import math

import pytest

from pbm.io.report import reasons
from pbm.io.report.surface_plot import seen_surface, surface_plot
from pbm.records.plan import Admit, ControlLimits, MonitorPlan, Outside
from pbm.records.tuning import Surface, Truncation
from pbm.stages.words import monitor_in_words
from tests.io.report import sample, variants

CHOSEN = variants.as_chosen(sample.SODIUM)


def test_the_choice_is_framed_at_its_truncation_and_parameter() -> None:
    (shown,) = reasons.shown_searches(CHOSEN, variants.reasons())
    assert shown.surface is not None and shown.surface.statistic == "EWMA"
    assert [row.chosen for row in shown.grid] == [None, None, 1, None]
    assert shown.taken and shown.edited == ""


def test_scores_are_shaded_by_how_near_they_are_to_the_least() -> None:
    (shown,) = reasons.shown_searches(CHOSEN, variants.reasons())
    assert shown.best == 8.4
    assert [shown.shade(score) for score in (8.4, 8.5, 8.8, 9.2, 10.0, 12.0, 13.0)] == [5, 5, 4, 3, 2, 1, 0]


def test_an_edited_plan_is_said_to_be_with_what_it_holds() -> None:
    (shown,) = reasons.shown_searches(sample.SODIUM, variants.reasons())
    assert "no longer holds the monitor that this search chose: it was edited by hand" in shown.edited
    assert sample.SODIUM.monitors[0].words in shown.edited


def test_a_monitor_taken_out_by_hand_is_missed_unless_the_search_itself_left_it_out() -> None:
    second = variants.search("moving SD, of 50 results, all results", "imprecision")
    (_, missed) = reasons.shown_searches(CHOSEN, variants.reasons(variants.search(), second))
    assert "taken out by hand" in missed.edited
    given = variants.reasons(variants.search(), second, together="one monitor alone lets fewer results out")
    (_, left_out) = reasons.shown_searches(CHOSEN, given)
    assert not left_out.taken and left_out.edited == ""


def test_a_stream_without_a_monitor_was_not_edited() -> None:
    (shown,) = reasons.shown_searches(variants.unwatched(sample.SODIUM), variants.reasons())
    assert not shown.taken and shown.edited == ""


def plan(statistic: str, **keys: object) -> MonitorPlan:
    given = {"centre": 0.5, "limits": ControlLimits(low=0.0, high=1.0), "budget_per_day": 0.03, "spread": 1.0}
    return MonitorPlan.model_validate({**given, "statistic": statistic, **keys})


@pytest.mark.parametrize(
    ("monitor", "parameter", "value"),
    [
        (plan("ewma", weight=0.05), "weight", 0.05),
        (plan("mean", window=50), "window", 50),
        (plan("batch", window=20, exponent=0.5), "window", 20),
        (plan("cusum", reference=0.3, level=140), "reference", 0.3),
        (plan("share", window=25, level=0.1, outside=Outside(low=1, high=2)), "window", 25),
    ],
    ids=["ewma", "mean", "batch", "cusum", "share"],
)
@pytest.mark.parametrize("transform", ["none", "log"])
@pytest.mark.parametrize(
    "admit",
    [Admit(), Admit(low=127, high=149), Admit(high=149, mode="winsorize"), Admit(low=0.5)],
    ids=["all", "both", "up to", "from"],
)
def test_the_words_of_the_plan_are_found_again_in_the_grid(
    monitor: MonitorPlan, parameter: str, value: float, transform: str, admit: Admit
) -> None:
    planned = monitor.model_copy(update={"transform": transform, "admit": admit})
    here = Truncation.model_validate({**admit.model_dump(), "transform": transform, "keeps": 1.0, "moves": 1.0})
    other = here.model_copy(update={"low": 1.0, "high": 2.0})
    told = monitor_in_words(planned, "mmol/L")
    surface = Surface(
        statistic=told.split(", ")[0], more="", parameter=parameter, columns=(value / 10, value), rows=(0, 1),
        scores=((1.0, 1.0), (1.0, 1.0)),
    )  # fmt: skip
    search = variants.search(told).model_copy(update={"surfaces": (surface,)})
    given = variants.reasons(search).model_copy(update={"truncations": (other, here)})
    (shown,) = reasons.shown_searches(sample.SODIUM, given)
    assert [row.chosen for row in shown.grid] == [None, 1]


def test_the_panels_say_where_each_statistic_is_best() -> None:
    told = seen_surface(variants.search())
    assert "the controls alone stand at 14.2" in told
    assert "EWMA: 8.40 at weight 0.05" in told
    assert "moving share, beyond the outer 5 % on either side: 13.0 at window 25" in told


def test_each_statistic_has_a_panel_inside_the_figure() -> None:
    drawn = surface_plot(variants.search())
    assert drawn is not None
    assert drawn.count('class="name"') == drawn.count('class="best"') == 2
    assert 'viewBox="0 0 392 162"' in drawn


def test_nothing_compared_draws_nothing() -> None:
    never = variants.search().surfaces[0].model_copy(update={"scores": ((None,) * 3,) * 4})
    assert surface_plot(variants.search().model_copy(update={"surfaces": (never,)})) is None


@pytest.mark.parametrize("alone", [1e-9, 1.0, 5e8])
def test_very_small_and_very_large_scores_are_drawn(alone: float) -> None:
    surface = variants.search().surfaces[0]
    scores = tuple(tuple(None if one is None else one / 14 * alone for one in row) for row in surface.scores)
    search = variants.search().model_copy(
        update={"schedule_alone": alone, "surfaces": (surface.model_copy(update={"scores": scores}),)}
    )
    drawn = surface_plot(search)
    assert drawn is not None and "nan" not in drawn and math.isfinite(alone)


def test_truncation_limits_are_short_in_the_grid() -> None:
    told = [reasons.limits_in_brief(one) for one in variants.TRUNCATIONS]
    assert told == ["none", "127 to 149", "127 to 149", "up to 149"]
