"""plan.toml holds a plan exactly, reads as laid out in the design, and tells mistakes by key."""

import tomllib
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pbm.errors import PlanError
from pbm.io.plan_file import plan_fingerprint, read_plan, write_plan
from pbm.records.plan import (
    Admit,
    BaselinePlan,
    ControlLimits,
    HeldOut,
    HistoryMark,
    LimitsInterval,
    Made,
    MonitorPlan,
    Plan,
    StreamPlan,
    Training,
)

MONITOR = MonitorPlan(
    admit=Admit(low=125, high=155),
    statistic="ewma",
    weight=0.05,
    centre=139.1,
    limits=ControlLimits(low=136.5, high=141.3),
    limits_interval=LimitsInterval(low=(136.2, 136.8), high=(141.0, 141.6)),
    budget_per_day=1 / 30,
    spread=2.9,
    train=Training(days=80, episodes=6),
    held_out=HeldOut(days=40, episodes=3, interval=(0.6, 8.8), kept=True),
)
MADE = Made(
    by="pbm 0.1.0",
    at=datetime(2031, 3, 2, 7, 14, 5, 123456, tzinfo=UTC),
    history=HistoryMark(
        first=datetime(2030, 1, 1, tzinfo=UTC),
        last=datetime(2030, 12, 31, 23, 59, tzinfo=UTC),
        rows=10**7,
        sha256="ab" * 32,
    ),
    seed=1,
    lab_sha256="cd" * 32,
    versions={"numpy": "2.4.6"},
)
SODIUM = StreamPlan(unit="mmol/L", verdict="useful", reason="", results_per_day=812.5, monitors=(MONITOR,))
THIN = StreamPlan(unit="mU/L", verdict="not useful here", reason='fewer than 5 a day: "too thin"', results_per_day=3)
PLAN = Plan(made=MADE, streams={"sodium@line-2": SODIUM, 'tsh@"odd" \\ name': THIN})


def test_a_baseline_with_sex_and_age_comes_back_equal_and_one_without_has_no_such_keys(tmp_path: Path) -> None:
    plain = BaselinePlan(wards={"ED": 0.1, "": -0.2}, hours=(0.0,) * 168)
    whole = plain.model_copy(update={"sexes": {"F": -0.1, "": 0.01}, "ages": {"75 and over": 1 / 3}})
    for baseline, there in ((plain, False), (whole, True)):
        stream = SODIUM.model_copy(update={"monitors": (MONITOR.model_copy(update={"baseline": baseline}),)})
        plan = Plan(made=MADE, streams={"sodium@line-2": stream})
        write_plan(tmp_path / "plan.toml", plan)
        assert read_plan(tmp_path / "plan.toml") == plan
        text = (tmp_path / "plan.toml").read_text()
        assert ("sexes" in text, "ages" in text) == (there, there)


def test_an_effect_of_a_band_that_is_none_is_told(tmp_path: Path) -> None:
    baseline = BaselinePlan(wards={}, hours=(0.0,) * 168, ages={"60-74": 0.2})
    stream = SODIUM.model_copy(update={"monitors": (MONITOR.model_copy(update={"baseline": baseline}),)})
    path = tmp_path / "plan.toml"
    write_plan(path, Plan(made=MADE, streams={"sodium@line-2": stream}))
    path.write_text(path.read_text().replace("60-74", "60-75"))
    with pytest.raises(PlanError, match=r'baseline: .*ages: "60-75" is none of under 1, 1-11'):
        read_plan(path)


def test_a_plan_comes_back_equal(tmp_path: Path) -> None:
    write_plan(tmp_path / "plan.toml", PLAN)
    assert read_plan(tmp_path / "plan.toml") == PLAN


def test_the_layout_is_the_one_of_the_design(tmp_path: Path) -> None:
    write_plan(tmp_path / "plan.toml", PLAN)
    lines = (tmp_path / "plan.toml").read_text().splitlines()
    for expected in (
        "[made]",
        '[streams."sodium@line-2"]',
        '[[streams."sodium@line-2".monitors]]',
        'admit = {low = 125.0, high = 155.0, mode = "truncate"}',
        "limits = {low = 136.5, high = 141.3}",
        "limits_interval = {low = [136.2, 136.8], high = [141.0, 141.6]}",
        "train = {days = 80, episodes = 6}",
        "at = 2031-03-02T07:14:05.123456Z",
    ):
        assert expected in lines
    assert tomllib.loads("\n".join(lines))["streams"]["sodium@line-2"]["monitors"][0]["statistic"] == "ewma"


finite = st.floats(allow_nan=False, allow_infinity=False)
positive = st.floats(min_value=0, exclude_min=True, allow_infinity=False)


@st.composite
def monitors(draw: st.DrawFn) -> MonitorPlan:
    low, centre, high = sorted(draw(st.lists(finite, min_size=3, max_size=3, unique=True)))
    return MonitorPlan(
        statistic="mean",
        window=draw(st.integers(2, 5000)),
        transform="boxcox",
        transform_lambda=draw(finite),
        centre=centre,
        limits=ControlLimits(low=low, high=high),
        budget_per_day=draw(positive),
        spread=draw(positive),
    )


@settings(max_examples=50, deadline=None)
@given(
    parts=st.lists(monitors(), max_size=2),
    name=st.text(min_size=1),
    reason=st.text(),
    at=st.datetimes(timezones=st.sampled_from([UTC, timezone(timedelta(hours=-9, minutes=-30))])),
)
def test_every_float_text_and_time_comes_back_to_the_last_bit(
    tmp_path_factory: pytest.TempPathFactory, parts: list[MonitorPlan], name: str, reason: str, at: datetime
) -> None:
    path = tmp_path_factory.getbasetemp() / "exact.toml"
    stream = StreamPlan(unit="g/L", verdict="marginal", reason=reason, results_per_day=1e-7, monitors=tuple(parts))
    plan = Plan(made=MADE.model_copy(update={"at": at}), streams={name: stream})
    write_plan(path, plan)
    assert read_plan(path) == plan


def test_a_mistake_in_an_edited_plan_names_its_key(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    write_plan(path, PLAN)
    path.write_text(path.read_text().replace("weight = 0.05", "weigth = 0.05").replace("low = 136.5", 'low = "136,5"'))
    with pytest.raises(PlanError) as error:
        read_plan(path)
    place = 'streams."sodium@line-2".monitors[1]'
    assert f'{place}.weigth: unknown key (found 0.05); did you mean "weight"?' in str(error.value)
    assert f'{place}.limits.low: found "136,5"; expected a number' in str(error.value)


def test_limits_out_of_order_are_told(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    write_plan(path, PLAN)
    path.write_text(path.read_text().replace("centre = 139.1", "centre = 149.1"))
    with pytest.raises(PlanError, match=r"expected limits.low < centre < limits.high"):
        read_plan(path)


def test_a_limit_on_one_side_only_is_written_without_the_other(tmp_path: Path) -> None:
    one_sided = MonitorPlan(
        statistic="ewsd",
        weight=0.02,
        level=139.0,
        watches="imprecision",
        centre=3.0,
        limits=ControlLimits(high=3.6),
        limits_interval=LimitsInterval(high=(3.5, 3.7)),
        budget_per_day=0.01,
        spread=3.0,
    )
    stream = StreamPlan(unit="mmol/L", verdict="useful", reason="", results_per_day=1, monitors=(one_sided,))
    plan = Plan(made=MADE, streams={"sodium@line-2": stream})
    write_plan(tmp_path / "plan.toml", plan)
    assert "limits = {high = 3.6}" in (tmp_path / "plan.toml").read_text()
    assert read_plan(tmp_path / "plan.toml") == plan


def test_limits_that_are_open_on_both_sides_are_told(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    write_plan(path, PLAN)
    path.write_text(path.read_text().replace("limits = {low = 136.5, high = 141.3}", "limits = {}"))
    with pytest.raises(PlanError, match=r"limits: found .*; expected \{ low = ... \}, \{ high = ... \} or both"):
        read_plan(path)


def test_a_missing_plan_is_a_plan_error(tmp_path: Path) -> None:
    with pytest.raises(PlanError, match="There is no file"):
        read_plan(tmp_path / "plan.toml")


def test_the_fingerprint_changes_with_any_edit(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    write_plan(path, PLAN)
    before = plan_fingerprint(path)
    path.write_text(path.read_text() + "\n")
    assert plan_fingerprint(path) != before


def test_a_failed_write_leaves_the_old_plan_and_nothing_beside_it(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "plan.toml"
    write_plan(path, PLAN)
    before = path.read_bytes()

    def stopped(handle: int) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("os.fsync", stopped)
    with pytest.raises(KeyboardInterrupt):
        write_plan(path, PLAN.model_copy(update={"streams": {}}))
    assert path.read_bytes() == before
    assert [one.name for one in tmp_path.iterdir()] == ["plan.toml"]
