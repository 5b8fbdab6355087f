"""Patient mix: effects found again, thin groups shrunk, one result as a history, wards that are new or never meet, sex and age."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from statsmodels.regression.linear_model import OLS

from pbm.methods.baseline import HOURS, Baseline, Effects, Groups, Mix, fit_baseline
from pbm.methods.jit import Floats
from pbm.methods.seeds import child

WARDS = ("clinic", "dialysis", "emergency", "ward 1")


def mix_of(count: int, name: str, wards: tuple[str, ...] = WARDS) -> Mix:
    random = child(1, "mix", name)
    return Mix(wards, random.integers(0, len(wards), count), random.integers(0, HOURS, count))


def effects(name: str, count: int, spread: float) -> Floats:
    return child(1, "effects", name).normal(0, spread, count)


def centred(values: Floats) -> Floats:
    return values - values.mean()


def test_known_effects_of_wards_and_hours_are_found_again() -> None:
    mix = mix_of(200_000, "known")
    ward, hour = effects("ward", 4, 2.0), effects("hour", HOURS, 1.0)
    y = 140 + ward[mix.ward] + hour[mix.hour] + child(2, "noise").normal(0, 2, len(mix.ward))
    found = fit_baseline(y, mix)
    assert dict(found.wards).keys() == set(WARDS)
    by_ward = np.array([dict(found.wards)[name] for name in WARDS])
    np.testing.assert_allclose(centred(by_ward), centred(ward), atol=0.05)
    np.testing.assert_allclose(centred(np.array(found.hours)), centred(hour), atol=0.25)
    assert (y - found.all(mix)).std() == pytest.approx(2.0, rel=0.01)
    assert (y - found.all(mix)).mean() == pytest.approx(y.mean(), abs=0.01), "the level belongs to the centre"


def test_unbalanced_wards_and_hours_are_told_apart_as_a_regression_tells_them() -> None:
    """A ward that works by night alone takes nothing of the night's own effect."""
    random = child(3, "unbalanced")
    hour = random.integers(0, 24, 40_000)
    ward = np.where((hour < 7) & (random.random(40_000) < 0.8), 1, 0)
    y = 5.0 * ward + 3.0 * (hour < 7) + random.normal(0, 1, 40_000)
    found = fit_baseline(y, Mix(("day", "night"), ward, hour))
    design = np.column_stack([ward, *[hour == h for h in range(24)]]).astype(float)
    fitted = OLS(y, design).fit()
    assert dict(found.wards)["night"] - dict(found.wards)["day"] == pytest.approx(fitted.params[0], abs=0.01)
    ours = y - found.all(Mix(("day", "night"), ward, hour))
    np.testing.assert_allclose(ours - ours.mean(), fitted.resid, atol=0.1)


def test_ward_hour_sex_and_age_are_told_apart_as_a_regression_tells_them() -> None:
    """Women are many in one ward and the old in another, so that no effect can be read off the means of its own groups."""
    random = child(11, "people")
    count = 60_000
    ward, hour = random.integers(0, 3, count), random.integers(0, 24, count)
    sex = (random.random(count) < np.array([0.2, 0.5, 0.9])[ward]).astype(np.int64)
    age = np.minimum(random.binomial(4, np.array([0.3, 0.5, 0.7])[ward]), 3)
    y = 2.0 * ward - 3.0 * sex + 1.5 * age + np.sin(hour / 4) + random.normal(0, 2, count)
    mix = Mix(("a", "b", "c"), ward, hour, Groups(("F", "M"), sex), Groups(("child", "young", "adult", "old"), age))
    found = fit_baseline(y, mix)
    design = np.column_stack(
        [*[ward == w for w in (1, 2)], sex, *[age == a for a in (1, 2, 3)], *[hour == h for h in range(24)]]
    ).astype(float)
    fitted = OLS(y, design).fit()
    wards, sexes, ages = (np.array([effect for _, effect in one]) for one in (found.wards, found.sexes, found.ages))
    np.testing.assert_allclose(wards[1:] - wards[0], fitted.params[:2], rtol=1e-3)
    np.testing.assert_allclose(sexes[1] - sexes[0], fitted.params[2], rtol=1e-3)
    np.testing.assert_allclose(ages[1:] - ages[0], fitted.params[3:6], rtol=1e-3)
    ours = y - found.all(mix)
    np.testing.assert_allclose(ours - ours.mean(), fitted.resid, atol=0.05)


def test_the_effect_of_a_thin_age_band_is_shrunk() -> None:
    random = child(12, "thin band")
    age = np.concatenate([np.repeat([0, 1], 5000), np.full(4, 2)])
    y = np.array([3.0, -3.0, 3.0])[age] + random.normal(0, 3, len(age))
    none = np.zeros(len(age), dtype=np.int64)
    found = fit_baseline(y, Mix(("",), none, none, age=Groups(("18-39", "75 and over", "under 1"), age)))
    raw = y[age == 2].mean() - y.mean()
    assert dict(found.ages)["under 1"] == pytest.approx(raw / (1 + 9 / 9 / 4), rel=0.1), "t^2 / (t^2 + s^2 / n), n = 4"
    assert dict(found.ages)["18-39"] == pytest.approx(3.0, abs=0.2)


def test_sex_and_age_take_part_where_somebody_has_them_only() -> None:
    y, hour, ward = child(13, "absent").normal(0, 1, 300), np.zeros(300, dtype=np.int64), np.full(300, "ED", object)
    nobody, women = np.full(300, "", object), np.where(np.arange(300) < 100, "F", "")
    found = fit_baseline(y, Mix.of(ward, hour, nobody, nobody))
    assert (found.sexes, found.ages) == ((), ())
    assert found == fit_baseline(y, Mix.of(ward, hour))
    known = fit_baseline(y - (women == "F"), Mix.of(ward, hour, women, nobody))
    assert (dict(known.sexes).keys(), known.ages) == ({"", "F"}, ())


def test_sex_or_age_that_explains_next_to_nothing_takes_no_part() -> None:
    random = child(14, "idle")
    sex, age = random.choice(["F", "M"], 20_000), random.choice(["18-39", "60-74", "75 and over"], 20_000)
    y = 2.0 * (age == "60-74") + random.normal(0, 3, 20_000)
    ward, hour = np.full(20_000, "ED", object), np.zeros(20_000, dtype=np.int64)
    found = fit_baseline(y, Mix.of(ward, hour, sex, age))
    assert (found.sexes, len(found.ages)) == ((), 3)
    assert found == fit_baseline(y, Mix.of(ward, hour, age=age))


def test_an_effect_of_sex_is_that_of_the_unknown_where_a_history_gives_no_sex() -> None:
    baseline = Baseline((), (0.0,) * HOURS, (("", 0.5), ("F", 2.0)), (("1-11", 3.0),))
    ward, hour = np.full(2, "", object), np.zeros(2, dtype=np.int64)
    assert baseline.all(Mix.of(ward, hour)).tolist() == [0.5, 0.5] == [baseline.one("", 0)] * 2


def test_an_effect_seen_seldom_is_shrunk_and_one_seen_often_is_kept() -> None:
    random = child(4, "thin")
    ward = np.concatenate([np.repeat(np.arange(10), 2000), np.repeat(np.arange(10, 20), 4)])
    effect = np.tile([1.0, -1.0], 10)
    y = effect[ward] + random.normal(0, 3, len(ward))
    found = fit_baseline(y, Mix(tuple(f"w{i:02}" for i in range(20)), ward, np.zeros(len(ward), dtype=np.int64)))
    by_ward = np.array([value for _, value in found.wards])
    raw = np.array([y[ward == w].mean() for w in range(20)]) - y.mean()
    kept = by_ward / raw
    assert (kept[:10] > 0.9).all(), "n t^2 = 2000 against s^2 = 9"
    assert kept[10:] == pytest.approx(1 / (1 + 9 / 4), abs=0.1), "t^2 / (t^2 + s^2 / n) with n = 4"
    assert np.abs(by_ward[10:] - effect[10:]).mean() < np.abs(raw[10:] - effect[10:]).mean()


def test_where_there_is_no_effect_nearly_nothing_is_taken_away() -> None:
    mix = mix_of(20_000, "none")
    y = 140 + child(5, "none").normal(0, 3, 20_000)
    assert fit_baseline(y, mix).all(mix).std() < 0.1


@given(
    st.lists(
        st.tuples(
            st.sampled_from([*WARDS, "new ward", ""]),
            st.integers(0, HOURS - 1),
            st.sampled_from(["F", "M", ""]),
            st.sampled_from(["under 1", "18-39", "60-74", "75 and over", ""]),
        ),
        min_size=1,
        max_size=50,
    ),
    st.sampled_from([(), (("", 0.1), ("F", -0.7), ("M", 0.3))]),
    st.sampled_from([(), (("18-39", 1 / 3), ("60-74", -0.7), ("75 and over", 0.9))]),
)
def test_one_result_gets_the_number_that_a_history_gets_to_the_last_bit(
    results: list[tuple[str, int, str, str]], sexes: Effects, ages: Effects
) -> None:
    wards = tuple((name, float(value)) for name, value in zip(WARDS, effects("bits", 4, 1.0), strict=True))
    baseline = Baseline(wards, tuple(effects("bits of hours", HOURS, 0.3).tolist()), sexes, ages)
    ward, hour, sex, age = (np.array(column) for column in zip(*results, strict=True))
    whole = baseline.all(Mix.of(ward, hour, sex, age))
    assert whole.tolist() == [baseline.one(*result) for result in results]


def test_a_ward_never_seen_in_training_has_the_hours_effect_alone() -> None:
    baseline = Baseline((("clinic", 2.0),), (0.5,) * HOURS)
    assert baseline.one("new ward", 3) == 0.5
    assert baseline.all(Mix(("new ward", "clinic"), np.array([0, 1]), np.array([3, 3]))).tolist() == [0.5, 2.5]


def test_wards_that_never_share_an_hour_still_fit_every_cell() -> None:
    """Their difference cannot be told from that of their hours; whichever takes it, what is left is the noise."""
    random = child(6, "apart")
    ward = np.repeat([0, 1], 10_000)
    hour = np.where(ward == 0, random.integers(0, 84, 20_000), random.integers(84, HOURS, 20_000))
    y = np.where(ward == 0, 1.0, -1.0) + random.normal(0, 0.5, 20_000)
    mix = Mix(("by day", "by night"), ward, hour)
    assert (y - fit_baseline(y, mix).all(mix)).std() == pytest.approx(0.5, rel=0.02)


def test_results_that_are_not_admitted_do_not_count() -> None:
    mix = mix_of(5000, "gaps")
    y = effects("gaps", 4, 2.0)[mix.ward] + child(7, "gaps").normal(0, 1, 5000)
    dropped = child(8, "gaps").random(5000) < 0.3
    fitted = fit_baseline(np.where(dropped, np.nan, y), mix)
    assert fitted == fit_baseline(y[~dropped], mix.rows(~dropped))


def test_a_ward_and_hours_without_any_admitted_result_have_no_effect() -> None:
    mix = mix_of(3000, "empty")
    y = np.where((mix.ward == 2) | (mix.hour == 5), np.nan, 1.0 * mix.ward)
    found = fit_baseline(y, mix)
    assert dict(found.wards)["emergency"] == 0.0 and found.hours[5] == 0.0


def test_one_ward_and_one_hour_leave_nothing_to_adjust() -> None:
    y = child(9, "single").normal(5, 1, 500)
    one = np.zeros(500, dtype=np.int64)
    assert fit_baseline(y, Mix(("",), one, one)) == Baseline((("", 0.0),), (0.0,) * HOURS)


def test_effects_are_stored_with_four_figures() -> None:
    mix = mix_of(5000, "figures")
    found = fit_baseline(effects("figures", 4, 2.0)[mix.ward] + child(10, "figures").normal(0, 1, 5000), mix)
    stored = [*dict(found.wards).values(), *found.hours]
    assert all(value == float(f"{value:.4g}") for value in stored)
