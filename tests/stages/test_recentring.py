"""What a reagent lot may do to a monitor: the centre follows a small change, a large one still raises an alarm, and both can be undone."""

from collections.abc import Sequence

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pbm.methods.onset import InControl
from pbm.methods.recentre import recentred
from pbm.records.alarm import Alarm
from pbm.records.event import EventKind
from pbm.records.laboratory import Lab
from pbm.records.plan import MonitorPlan
from pbm.stages.monitor import StreamMonitor
from tests.live_laboratory import MINUTE, SODIUM, START, TSH, ewma, laboratory, results, shifted_values

OVER, AT_MOST, TEA = 200, 0.25, 4.0
LOT = 500


def lab(**changed: object) -> Lab:
    given = laboratory()
    return given.model_copy(update={"events": given.events.model_copy(update=changed)})


def monitor(given: Lab | None = None, chosen: MonitorPlan | None = None) -> StreamMonitor:
    return StreamMonitor(SODIUM, 0, chosen or ewma(half_width=3.0, weight=0.05), given or lab())


def fed(one: StreamMonitor, values: Sequence[float], events: dict[int, EventKind]) -> list[Alarm]:
    """The alarms of results, a minute apart; events by the place of the first result after them."""
    for place, kind in events.items():
        one.note(START + place * MINUTE, kind)
    return [alarm for result in results(values) if (alarm := one.take(result))]


def level(one: StreamMonitor) -> float:
    """How far the centre has moved, in mmol/L (the tests' monitors transform nothing)."""
    return one._centre.learned()[0]


@pytest.mark.parametrize("shift", [-0.8, -0.4, 0.0, 0.4, 0.8])
def test_after_a_lot_the_centre_follows_a_change_below_the_cap(shift: float) -> None:
    one = monitor()
    fed(one, shifted_values(1, 1500, {LOT: shift}), {LOT: "reagent lot"})
    mean = shifted_values(1, 1500, {LOT: shift})[LOT : LOT + OVER].mean() - 140
    assert level(one) == pytest.approx(mean * 0.85, abs=0.15), "shrunk a little towards where it was"
    assert abs(level(one)) <= AT_MOST * TEA
    (told,) = one.said
    assert told.time == START + (LOT + OVER - 1) * MINUTE == told.closed_at
    assert f"{level(one):+.3g} mmol/L" in told.text and "200 results" in told.text


def test_a_change_beyond_the_cap_is_followed_to_the_cap_and_raises_an_alarm() -> None:
    one = monitor()
    alarms = fed(one, shifted_values(2, 1500, {LOT: 5.0}), {LOT: "reagent lot"})
    assert level(one) == AT_MOST * TEA
    assert "relearn_at_most in lab.toml does not allow" in one.said[0].text
    assert [alarm.side for alarm in alarms] == ["HIGH"]
    # What is shown is in the unit of results: the limit has moved with the centre.
    assert alarms[0].shown_limit == pytest.approx(143.0 + 1.0, abs=0.2)
    assert alarms[0].estimate is not None and alarms[0].estimate.size == pytest.approx(4.0, abs=1.5)


def test_without_an_event_the_same_results_raise_an_alarm_that_the_event_spares() -> None:
    values = shifted_values(3, 3000, {LOT: 0.9})
    tight = ewma(half_width=1.45, weight=0.05)
    without, with_lot = (fed(monitor(chosen=tight), values, events) for events in ({}, {LOT: "reagent lot"}))
    assert len(without) >= 5 and len(with_lot) <= 1


def test_keep_the_old_centre_goes_back_to_where_it_was_before_the_last_event() -> None:
    values = shifted_values(4, 2500, {LOT: 0.7, 1200: -1.3})
    events: dict[int, EventKind] = {LOT: "reagent lot", 1200: "reagent lot"}
    first, both, undone = monitor(), monitor(), monitor()
    fed(first, values[:1200], events)
    fed(both, values, events)
    fed(undone, values, {**events, 1800: "keep the old centre"})
    assert level(both) < -0.2 < 0.4 < level(first)
    assert level(undone) == level(first)


def test_a_chain_of_lots_never_carries_the_centre_beyond_the_cap() -> None:
    steps = {n * 300: 0.5 for n in range(1, 9)}
    one = monitor()
    fed(one, shifted_values(5, 3000, steps), dict.fromkeys(steps, "reagent lot"))
    assert level(one) == AT_MOST * TEA


def test_a_statistic_that_begins_afresh_forgets_what_was_before() -> None:
    one = monitor(chosen=ewma(statistic="mean", weight=None, window=20, limits={"low": 137.0, "high": 143.0}))
    values = [140.0] * 30 + [150.0] * 30 + [140.0] * 30
    alarms = fed(one, values, {60: "restart"})
    assert len(alarms) == 1 and one.episode == 0
    assert (one.admitted, one.taken) == (30, 90)
    assert one.value == 140.0


def test_the_onset_of_a_later_alarm_is_not_sought_before_the_restart() -> None:
    one = monitor()
    alarms = fed(one, shifted_values(6, 700, {300: 6.0}), {LOT: "restart"})
    assert len(alarms) == 2
    assert alarms[1].estimate is not None and alarms[1].estimate.onset_low >= START + LOT * MINUTE


def test_warming_up_begins_anew() -> None:
    one = monitor(chosen=ewma(statistic="mean", weight=None, window=50, limits={"low": 137.0, "high": 143.0}))
    fed(one, [140.0] * 91, {60: "calibration"})
    snapshot = one.snapshot()
    assert (snapshot.admitted, snapshot.needed, snapshot.taken) == (31, 50, 91)


def test_maintenance_and_notes_change_nothing_unless_the_laboratory_says_so() -> None:
    values = shifted_values(7, 900, {LOT: 2.0})
    plain, noted, told = monitor(), monitor(), monitor(lab(restart=("maintenance",), relearn=()))
    alarms = [fed(plain, values, {}), fed(noted, values, {LOT: "maintenance", 600: "note"})]
    fed(told, values, {LOT: "maintenance"})
    assert alarms[0] == alarms[1] and plain.to_bytes() == noted.to_bytes()
    assert told.admitted == 400 and level(told) == 0.0


def test_recorded_controls_are_told_with_the_alarm_the_newest_at_its_time() -> None:
    one = monitor(chosen=ewma())
    kinds: dict[int, EventKind] = {300: "control rejected", 200: "control accepted", 800: "control accepted"}
    alarms = fed(one, shifted_values(8, 600, {400: 5.0}), kinds)
    assert alarms[-1].last_control == START + 300 * MINUTE and alarms[-1].last_control_passed is False


def test_on_a_transformed_scale_the_cap_is_that_of_the_unit() -> None:
    chosen = ewma(np.log(2.0), 0.5, transform="log", spread=0.5)
    one = StreamMonitor(TSH, 0, chosen, lab())
    one.note(START, "reagent lot")
    for result in results(np.full(300, 3.0), TSH):
        one.take(result)
    # TEa is 20 %: a quarter of it at 2 mIU/L is 0.1.
    assert level(one) == pytest.approx(0.1, rel=1e-6)


@given(st.floats(-50, 50), st.integers(1, 1000), st.floats(-1, 1), st.floats(0.1, 10), st.floats(0, 2), st.floats(0, 3))
def test_the_centre_stays_inside_the_caps_and_between_belief_and_results(
    mean: float, count: int, before: float, spread: float, wander: float, cap: float
) -> None:
    before = max(-cap, min(cap, before))
    found = recentred(mean * count, count, before, InControl(0.0, spread, 1.5, 1.0, wander), -cap, cap)
    assert -cap <= found <= cap
    assert min(before, mean) - 1e-9 <= found <= max(before, mean) + 1e-9
