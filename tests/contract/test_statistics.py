"""Every statistic of the table: live = scan = restarted anywhere, and what its definition says."""

from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError
from river.stats import EWMean, Mean, RollingQuantile, Var
from river.utils import Rolling

from pbm.methods import jit
from pbm.methods.alarm import Limits, episodes
from pbm.methods.chain import Tracker, tracker_for
from pbm.methods.statistics import STATISTICS
from pbm.records.plan import PARAMETER_KEYS, MonitorPlan
from pbm.stages import from_plan
from tests import naive
from tests.contract.statistics_table import LEVEL, SPREAD, TRACKERS, admitted, live, same_bits, stream

each_tracker = pytest.mark.parametrize("tracker", TRACKERS.values(), ids=TRACKERS)
STREAMS = (stream(1, 130), stream(2, 130, dropped=0.2), stream(3, 130, dropped=0.1, step=1.0))


def test_every_statistic_of_the_table_is_held_to_the_contract() -> None:
    assert {tracker.statistic for tracker in TRACKERS.values()} == set(STATISTICS)


@each_tracker
def test_the_live_step_gives_the_scan_bit_for_bit(tracker: Tracker) -> None:
    for z in STREAMS:
        path, state = live(tracker, z)
        array = np.array(tracker.start())
        assert same_bits(path, jit.scan(tracker.law.step, array, z, tracker.par))
        assert same_bits(np.array(state), array)
        assert same_bits(path, tracker.path(z))


@each_tracker
def test_restarting_after_any_value_changes_no_bit(tracker: Tracker) -> None:
    for z in STREAMS:
        whole, _ = live(tracker, z)
        for cut in range(len(z) + 1):
            array = np.array(tracker.start())
            before = jit.scan(tracker.law.step, array, z[:cut], tracker.par)
            after, _ = live(tracker, z[cut:], array.tolist())
            assert same_bits(whole, np.concatenate([before, after])), f"history then live, cut at {cut}"
            before, state = live(tracker, z[:cut])
            after = jit.scan(tracker.law.step, np.array(state), z[cut:], tracker.par)
            assert same_bits(whole, np.concatenate([before, after])), f"live then history, cut at {cut}"


@each_tracker
def test_a_simulation_started_anywhere_alarms_where_the_live_monitor_does(tracker: Tracker) -> None:
    z = stream(4, 160, dropped=0.1)
    path, _ = live(tracker, z)
    judged = path[~np.isnan(path)]
    low, high = np.quantile(judged, [0.1, 0.9])
    at = np.arange(len(z))
    found = tracker.first_crossings(z, tracker.states_at(z, at), at, np.full(len(z), len(z)), low, high)
    out = np.flatnonzero((path < low) | (path > high))
    following = np.searchsorted(out, at)
    expected = [out[k] if k < len(out) else -1 for k in following]
    assert found.tolist() == expected


@each_tracker
def test_runs_one_after_the_other_end_where_single_runs_do(tracker: Tracker) -> None:
    z = stream(5, 300, dropped=0.1)
    low, high = np.nanquantile(tracker.path(z), [0.2, 0.8])
    ends, first = [], 0
    while True:
        state, crossed = tracker.start(), -1
        for i in range(first, len(z)):
            if z[i] == z[i] and not (low <= (s := tracker.law.step(state, z[i], tracker.par)) <= high or np.isnan(s)):
                crossed = i
                break
        if crossed < 0:
            break
        ends.append(crossed)
        first = crossed + 1
    assert len(ends) > 1
    assert tracker.run_ends(z, low, high).tolist() == ends


NAIVE: dict[str, Callable[[list[float], Tracker], list[float]]] = {
    "mean": lambda z, t: naive.moving_mean(z, int(t.parameter)),
    "median": lambda z, t: naive.moving_median(z, int(t.parameter)),
    "sd": lambda z, t: naive.moving_sd(z, int(t.parameter)),
    "ewma": lambda z, t: naive.ewma(z, t.parameter, t.centre),
    "ewsd": lambda z, t: naive.ewsd(z, t.parameter, t.more[0], t.centre),
    "share": lambda z, t: naive.moving_share(z, int(t.parameter), *t.more),
    "cusum": lambda z, t: naive.cusum(z, t.parameter, *t.more),
    "batch": lambda z, t: naive.batch_mean(z, int(t.parameter), t.more[0], t.centre),
}


@each_tracker
def test_each_value_is_what_the_definition_gives(tracker: Tracker) -> None:
    for z in STREAMS:
        ours = tracker.path(z)[~np.isnan(z)]
        theirs = NAIVE[tracker.statistic](admitted(z).tolist(), tracker)
        np.testing.assert_allclose(ours, theirs, rtol=1e-11, atol=1e-11)


def _ewm(values: "pd.Series[float]", weight: float, begin: float) -> "pd.Series[float]":
    """pandas starts at the first value it is given, ours at the centre."""
    return pd.Series([begin, *values]).ewm(alpha=weight, adjust=False).mean().iloc[1:]


def _cusum_by_minima(z: "pd.Series[float]", reference: float, level: float, spread: float) -> "pd.Series[float]":
    """Each sum is a plain cumulative sum less its lowest point so far (at most 0)."""
    u = (z - level) / spread
    ups, downs = (u - reference).cumsum(), (-u - reference).cumsum()
    up, down = ups - ups.cummin().clip(upper=0), downs - downs.cummin().clip(upper=0)
    return up.where(up >= down, -down)


def _batch_means(z: "pd.Series[float]", size: int) -> "pd.Series[float]":
    ends = np.arange(len(z)) % size == size - 1
    return z.groupby(np.arange(len(z)) // size).transform("mean").where(ends)


PANDAS: dict[str, Callable[["pd.Series[float]", Tracker], "pd.Series[float]"]] = {
    "mean": lambda z, t: z.rolling(int(t.parameter)).mean(),
    "median": lambda z, t: z.rolling(int(t.parameter)).median(),
    "sd": lambda z, t: z.rolling(int(t.parameter)).std(),
    "ewma": lambda z, t: _ewm(z, t.parameter, t.centre),
    "ewsd": lambda z, t: _ewm((z - t.more[0]) ** 2, t.parameter, t.centre**2) ** 0.5,
    "share": lambda z, t: (~z.between(t.more[0], t.more[1])).astype(float).rolling(int(t.parameter)).mean(),
    "cusum": lambda z, t: _cusum_by_minima(z, t.parameter, *t.more),
    "batch": lambda z, t: _batch_means(z, int(t.parameter)),
}


@pytest.mark.parametrize("name", [name for name, t in TRACKERS.items() if t.statistic != "batch" or t.more == (1.0,)])
def test_pandas_gives_the_same_on_a_long_stream(name: str) -> None:
    tracker, z = TRACKERS[name], stream(6, 5_000)
    ours = tracker.path(z)
    theirs = PANDAS[tracker.statistic](pd.Series(z), tracker).to_numpy()
    np.testing.assert_allclose(ours, theirs, rtol=1e-9, atol=1e-9)


class _Twin:
    """A statistic of river fed with f(value), read with g, and asked for nothing before it has a whole window."""

    def __init__(self, of: object, window: int, feed: Callable[[float], float], read: Callable[[float], float]) -> None:
        self.of, self.window, self.feed, self.read, self.seen = of, window, feed, read, 0

    def take(self, x: float) -> float:
        self.of.update(self.feed(x))  # type: ignore[attr-defined]
        self.seen += 1
        return self.read(self.of.get()) if self.seen >= self.window else np.nan  # type: ignore[attr-defined]


def _begun(weight: float, value: float) -> EWMean:
    mean = EWMean(fading_factor=weight)
    mean.update(value)
    return mean


def _same(x: float) -> float:
    return x


RIVER: dict[str, Callable[[Tracker], _Twin]] = {
    "mean": lambda t: _Twin(Rolling(Mean, window_size=int(t.parameter)), int(t.parameter), _same, _same),
    "median": lambda t: _Twin(RollingQuantile(0.5, window_size=int(t.parameter)), int(t.parameter), _same, _same),
    "sd": lambda t: _Twin(Rolling(Var, window_size=int(t.parameter)), int(t.parameter), _same, np.sqrt),
    "ewma": lambda t: _Twin(_begun(t.parameter, t.centre), 1, _same, _same),
    "ewsd": lambda t: _Twin(_begun(t.parameter, t.centre**2), 1, lambda x: (x - t.more[0]) ** 2, np.sqrt),
    "share": lambda t: _Twin(
        Rolling(Mean, window_size=int(t.parameter)),
        int(t.parameter),
        lambda x: float(not t.more[0] <= x <= t.more[1]),
        _same,
    ),
}


@pytest.mark.parametrize("name", [name for name, t in TRACKERS.items() if t.statistic in RIVER])
def test_river_gives_the_same_after_every_value(name: str) -> None:
    tracker, z = TRACKERS[name], stream(7, 600)
    twin = RIVER[tracker.statistic](tracker)
    theirs = [twin.take(x) for x in z.tolist()]
    np.testing.assert_allclose(tracker.path(z), theirs, rtol=1e-8, atol=1e-9)


values = st.lists(st.floats(-1e6, 1e6, allow_subnormal=False), min_size=1, max_size=60)


@given(values, st.integers(2, 12), st.sampled_from(sorted(STATISTICS)), st.floats(0.01, 1.0))
@settings(deadline=None, max_examples=120)
def test_any_values_give_the_same_bits_live_and_scanned_and_what_the_definition_gives(
    given_values: list[float], window: int, name: str, share: float
) -> None:
    law = STATISTICS[name]
    numbers = {
        "window": window,
        "weight": share,
        "reference": share,
        "level": 10.0,
        "spread": 2.0,
        "low": -5.0,
        "high": 50.0,
    }
    par = [numbers.get(parameter, share) for parameter in law.parameters]
    tracker = Tracker(name, par[0], 10.0, tuple(par[1:]))
    z = np.array(given_values)
    path, _ = live(tracker, z)
    assert same_bits(path, tracker.path(z))
    # A power of 1 / exponent magnifies the last bits of the mean it is taken of.
    scale = 1e-9 / share if name == "batch" else 1e-9
    np.testing.assert_allclose(
        path, NAIVE[name](given_values, tracker), rtol=scale, atol=scale * np.abs(z).max() + 1e-9
    )


@given(values, st.floats(0.01, 2.0), st.floats(0.5, 20.0), st.floats(1.0, 2.0))
@settings(deadline=None, max_examples=120)
def test_the_signed_cusum_first_leaves_its_limits_where_the_larger_of_both_sums_does(
    given_values: list[float], reference: float, narrow: float, ratio: float
) -> None:
    u = np.array(given_values) / 1e5
    tracker = Tracker("cusum", reference, 0.0, (0.0, 1.0))
    for low, high in ((-narrow, narrow * ratio), (-narrow * ratio, narrow)):
        up = down = 0.0
        expected = -1
        for i, x in enumerate(u):
            up, down = max(0.0, up + x - reference), max(0.0, down - x - reference)
            if up > high or down > -low:
                expected = i
                break
        begin = np.array([tracker.start()])
        found = tracker.first_crossings(u, begin, np.array([0]), np.array([len(u)]), low, high)
        assert found[0] == expected


def test_limits_of_a_cusum_further_apart_than_two_to_one_can_hide_the_smaller_sum() -> None:
    u = np.array([-9.0, 6.0])
    down_first = Tracker("cusum", 0.0, 0.0, (0.0, 1.0))
    assert down_first.path(u).tolist() == [-9.0, 6.0]
    u = np.array([-9.0, 4.0])
    assert down_first.path(u).tolist() == [-9.0, -5.0], "the upper sum stands at 4 and is not shown"


def test_a_plan_refuses_limits_of_a_cusum_that_could_hide_a_sum() -> None:
    written = _written(_pinned("cusum"))
    MonitorPlan.model_validate({**written, "limits": {"low": -4.0, "high": 8.0}})
    with pytest.raises(ValidationError, match="at most twice as far"):
        MonitorPlan.model_validate({**written, "limits": {"low": -4.0, "high": 8.5}})


@pytest.mark.parametrize("name", [name for name in TRACKERS if "window" in TRACKERS[name].named])
def test_a_window_is_never_judged_before_it_is_full(name: str) -> None:
    window = int(TRACKERS[name].named["window"])
    judged = ~np.isnan(TRACKERS[name].path(stream(12, 3 * window)))
    assert np.flatnonzero(judged)[0] == window - 1
    if TRACKERS[name].statistic == "batch":
        assert np.flatnonzero(judged).tolist() == [window - 1, 2 * window - 1, 3 * window - 1]
    else:
        assert judged[window - 1 :].all()


@pytest.mark.parametrize("name", ["mean", "median", "sd", "share"])
def test_a_far_value_leaves_nothing_behind_once_it_has_left_the_window(name: str) -> None:
    more = {"share": (135.0, 145.0)}.get(name, ())
    tracker, z = Tracker(name, 10, LEVEL, more), stream(8, 80)
    spoilt = z.copy()
    spoilt[33] = 1e9
    gap = np.abs(tracker.path(spoilt) - tracker.path(z))
    # The mean is summed afresh at the end of a lap; until then the far value leaves the rounding of a number of its own size.
    clear = 50 if name == "mean" else 43
    assert gap[clear:].max() <= 1e-12
    assert np.nanmax(gap[:33]) == 0.0


def test_the_moving_sd_of_equal_values_is_exactly_zero_and_never_negative_under_the_root() -> None:
    path = Tracker("sd", 7, 1.0).path(np.full(50, 139.1))
    assert path[6:].tolist() == [0.0] * 44


def test_rounding_errors_do_not_grow_with_the_length_of_the_stream() -> None:
    z = stream(9, 400_000)
    for name, twin in (("mean", naive.moving_mean), ("sd", naive.moving_sd)):
        last = twin(z[-50:].tolist(), 50)[-1]
        assert Tracker(name, 50, LEVEL).path(z)[-1] == pytest.approx(last, rel=1e-13)


# Alarms on 1,200 values of seed 31, disturbed from value 600 on: by 1 SD upwards, or by twice the SD for the statistics of imprecision.
# Limits lie about 3 SD of each statistic from its centre, so that the values of a single stream hold a few false alarms (before 600, and
# after the re-arming of the skewed SDs). The mean of 20 and the EWMA of weight 0.1, which have the same variance, are nearly in step; the
# CUSUM is first; the share is slow, the batch-weighted mean answers at the end of the first whole batch.
# name: parameter, further parameters, centre, half width, places of alarms
PINNED: dict[str, tuple[float, tuple[float, ...], float, float, list[int]]] = {
    "mean": (20, (), 140.0, 2.0, [496, 608, 761, 1003]),
    "median": (21, (), 140.0, 2.4, [642, 948, 1016]),
    "sd": (20, (), 2.94, 1.46, [571, 612, 1040]),
    "ewma": (0.1, (), 140.0, 2.05, [492, 605, 755, 1002]),
    "ewsd": (0.1, (LEVEL,), 2.94, 1.45, [356, 423, 493, 564, 612]),
    "share": (20, (LEVEL - SPREAD, LEVEL + SPREAD), 0.317, 0.31, [653, 761, 869, 1030, 1094]),
    "cusum": (0.5, (LEVEL, SPREAD), 0.0, 4.6, [423, 492, 601]),
    "batch": (20, (0.5,), 140.0, 0.91, [619]),
}


@pytest.mark.parametrize("name", sorted(STATISTICS))
def test_alarms_on_a_seeded_stream_stand_where_they_always_stood(name: str) -> None:
    parameter, more, centre, width, expected = PINNED[name]
    tracker = Tracker(name, parameter, centre, more)
    z = stream(31, 1_200)
    z[600:] = LEVEL + 2 * (z[600:] - LEVEL) if "imprecision" in tracker.law.looks_for else z[600:] + SPREAD
    limits = Limits(centre - width, centre + width, centre, 0.5)
    assert episodes(tracker.path(z), limits).at.tolist() == expected
    assert episodes(np.array(NAIVE[name](z.tolist(), tracker)), limits).at.tolist() == expected


def test_each_statistic_is_centred_on_what_it_shows_in_control() -> None:
    z = stream(10, 40_000, dropped=0.05)
    centred = {
        "mean": (50, {}, LEVEL),
        "median": (50, {}, LEVEL),
        "sd": (50, {}, SPREAD),
        "ewma": (0.05, {}, LEVEL),
        "ewsd": (0.05, {}, SPREAD),
        "share": (50, {"low": LEVEL - SPREAD, "high": LEVEL + SPREAD}, 0.317311),
        "cusum": (0.5, {}, 0.0),
        "batch": (20, {"exponent": 0.5}, LEVEL),
    }
    for name, (parameter, more, centre) in centred.items():
        tracker = tracker_for(z, name, parameter, **more)
        assert tracker.centre == pytest.approx(centre, rel=0.015, abs=1e-12), name
        assert tracker.named.get("level", LEVEL) == pytest.approx(LEVEL, rel=0.01)
        assert tracker.named.get("spread", SPREAD) == pytest.approx(SPREAD, rel=0.01)


def test_a_level_that_is_given_is_not_learned() -> None:
    assert tracker_for(stream(10, 500), "cusum", 0.5, level=100.0).named["level"] == 100.0


@pytest.mark.parametrize(
    ("name", "more"), [("share", {}), ("share", {"low": 1.0}), ("mean", {"low": 1.0}), ("batch", {"weight": 0.5})]
)
def test_a_missing_or_foreign_parameter_is_refused_by_name(name: str, more: dict[str, float]) -> None:
    with pytest.raises(ValueError, match=f"statistic {name} takes"):
        tracker_for(stream(10, 500), name, 20, **more)


def test_a_tracker_without_all_parameters_is_refused() -> None:
    with pytest.raises(ValueError, match=r"statistic share needs 2 more parameters \('low', 'high'\)"):
        Tracker("share", 20, 0.1)


def test_no_values_cannot_centre_a_statistic() -> None:
    with pytest.raises(ValueError, match="no values"):
        tracker_for(np.full(5, np.nan), "mean", 3)


KEYS: dict[str, tuple[str, ...]] = {str(name): keys for name, keys in PARAMETER_KEYS.items()}


def _written(tracker: Tracker) -> dict[str, Any]:
    """A monitor as `plan.toml` holds it."""
    limits = {"low": tracker.centre - 1, "high": tracker.centre + 1}
    rest = {"centre": tracker.centre, "limits": limits, "spread": SPREAD, "budget_per_day": 0.1}
    parameters = from_plan.planned_parameters(tracker, LEVEL)
    outside = {"outside": parameters["outside"].model_dump(exclude_none=True)} if "outside" in parameters else {}
    return {"statistic": tracker.statistic, **parameters, **outside, **rest}


def _pinned(name: str) -> Tracker:
    parameter, more, centre, _, _ = PINNED[name]
    return Tracker(name, parameter, centre, more)


@pytest.mark.parametrize("name", sorted(STATISTICS))
def test_a_plan_carries_every_parameter_of_every_statistic(name: str) -> None:
    plan = MonitorPlan.model_validate(_written(_pinned(name)))
    assert from_plan.tracker(plan) == _pinned(name)
    above = TRACKERS["share of 7 above"]
    assert from_plan.tracker(MonitorPlan.model_validate(_written(above))) == above


@pytest.mark.parametrize("name", sorted(STATISTICS))
@pytest.mark.parametrize("key", ["window", "weight", "reference", "outside", "exponent"])
def test_a_plan_with_a_parameter_too_many_or_too_few_is_refused(name: str, key: str) -> None:
    written = _written(_pinned(name))
    foreign = {"window": 5, "weight": 0.5, "reference": 0.5, "outside": {"low": 1.0}, "exponent": 0.5}
    if key in written:
        del written[key]
    else:
        written[key] = foreign[key]
    with pytest.raises(ValidationError, match=f"statistic {name} takes"):
        MonitorPlan.model_validate(written)


@pytest.mark.parametrize("name", sorted(name for name, keys in KEYS.items() if "level" in keys))
def test_a_plan_without_the_level_of_the_values_is_refused_where_the_centre_is_not_that_level(name: str) -> None:
    written = _written(_pinned(name))
    del written["level"]
    with pytest.raises(ValidationError, match=f"statistic {name} takes"):
        MonitorPlan.model_validate(written)


def test_an_open_side_of_a_share_is_left_out_of_the_plan() -> None:
    written = _written(_pinned("share"))
    plan = MonitorPlan.model_validate({**written, "outside": {"high": 145.0}})
    assert from_plan.tracker(plan).more == (-np.inf, 145.0)
    for wrong in ({}, {"low": 145.0, "high": 135.0}):
        with pytest.raises(ValidationError, match="outside"):
            MonitorPlan.model_validate({**written, "outside": wrong})


def test_the_onset_of_a_change_is_sought_about_the_level_of_the_values_not_of_the_statistic() -> None:
    for name in ("cusum", "ewma"):
        plan = MonitorPlan.model_validate(_written(_pinned(name)))
        assert from_plan.in_control(plan).centre == LEVEL, name
