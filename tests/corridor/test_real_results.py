"""The whole job on real results (sources in real_extracts.py), judged by twins that share no code with pbm."""

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import chi2, norm

from pbm.io.history import stream_sizes
from pbm.io.plan_file import read_plan
from pbm.records.plan import MonitorPlan, StreamPlan
from tests.corridor import naive_monitor
from tests.corridor.conftest import done

pytestmark = pytest.mark.slow


def hdl_rows(folder: Path) -> list[tuple[int, float, str]]:
    """The extract as plain rows, read by pandas, in order of time."""
    read = pd.read_csv(folder / "hdl.csv")
    times = pd.to_datetime(read["reported_at"]).dt.as_unit("us").astype("int64")
    return [(int(t), float(v), "") for t, v in zip(times, read["result"], strict=True)]


def hdl_plan(folder: Path) -> StreamPlan:
    return read_plan(folder / "plan.toml").streams["hdl@line-1"]


def only_monitor(plan: StreamPlan) -> MonitorPlan:
    (monitor,) = plan.monitors
    return monitor


def test_every_real_result_is_taken_and_a_monitor_is_useful(hdl: Path) -> None:
    assert {str(name): size for name, size in stream_sizes(hdl / "history").items()} == {"hdl@line-1": 161_259}
    assert hdl_plan(hdl).verdict == "useful"


def test_held_out_alarms_equal_a_recount_by_the_naive_monitor(hdl: Path) -> None:
    plan, rows = hdl_plan(hdl), hdl_rows(hdl)
    monitor = only_monitor(plan)
    found = naive_monitor.alarms(monitor, naive_monitor.path(monitor, naive_monitor.values(monitor, rows, "UTC")))
    first = int(pd.Timestamp(plan.held_out_from).value // 1000)
    held_out = sum(rows[i][0] >= first for i in found)
    assert monitor.held_out is not None and monitor.train is not None
    assert held_out == monitor.held_out.episodes
    assert len(found) - held_out == monitor.train.episodes


def test_the_interval_of_the_held_out_alarms_is_exact_and_decides_whether_the_limit_was_kept(hdl: Path) -> None:
    """Source of the interval: chi-squared quantiles of scipy (Biometrika 1936;28:437-42)."""
    judged = only_monitor(hdl_plan(hdl)).held_out
    assert judged is not None
    low = chi2.ppf(0.05, 2 * judged.episodes) / 2 if judged.episodes else 0.0
    assert judged.interval == pytest.approx((low, chi2.ppf(0.95, 2 * judged.episodes + 2) / 2), rel=1e-12)
    assert judged.kept == (low <= judged.days / 30)


def test_results_until_detection_equal_a_simulation_by_the_naive_monitor(hdl: Path) -> None:
    """Onsets of a shift of one TEa (20 % or 6 mg/dL, the greater) at 150 places of the held-out days, followed by the naive monitor."""
    done("appraise", "--lab", hdl, "--workers", "1")
    appraisal = json.loads((hdl / "reports" / "appraisal.json").read_text())
    judged = appraisal["streams"][0]["judged"]
    plan, rows = hdl_plan(hdl), hdl_rows(hdl)
    monitor = only_monitor(plan)
    in_control = naive_monitor.path(monitor, naive_monitor.values(monitor, rows, "UTC"))
    first = next(i for i, row in enumerate(rows) if row[0] >= int(pd.Timestamp(plan.held_out_from).value // 1000))
    random = np.random.default_rng(11)
    counts = []
    for onset in random.integers(first, len(rows) - 5_600, 150):
        level = next(s for s in reversed(in_control[:onset]) if not np.isnan(s))
        low, high = monitor.limits.ends
        if not low <= level <= high:
            continue
        shifted = [
            (t, float(round(x + random.uniform(-0.5, 0.5) + max(6.0, 0.2 * x))), w)
            for t, x, w in rows[onset : onset + 600]
        ]
        z = naive_monitor.values(monitor, shifted, "UTC")
        started = monitor.model_copy(update={"centre": level})
        after = naive_monitor.path(started, z)
        counts.append(naive_monitor.alarms(monitor, after)[0] + 1)
    ours = next(f for f in judged["faults"] if f["size"] == 1.0 and f["sign"] == 1)
    error = np.std(counts) * np.sqrt(1 / len(counts) + 1 / 400)
    assert abs(np.mean(counts) - ours["until"]["monitor"]["mean"]["value"]) <= 3.5 * error
    assert ours["never"]["monitor"]["value"] == 0


def test_the_schedule_alone_agrees_with_the_power_of_its_rules_by_normal_theory(hdl: Path) -> None:
    """A large shift is found by the first event: 1-3s on two levels alone gives a lower bound (closed form, normal distribution)."""
    done("appraise", "--lab", hdl, "--workers", "1")
    appraisal = json.loads((hdl / "reports" / "appraisal.json").read_text())
    for fault in appraisal["streams"][0]["judged"]["faults"]:
        shifts = [fault["sign"] * fault["size"] * max(6.0, 0.2 * c) / s for c, s in ((35, 0.8), (65, 1.3))]
        misses = [norm.cdf(3 - d) - norm.cdf(-3 - d) for d in shifts]
        assert fault["by_first_event"]["schedule"]["value"] >= 1 - np.prod(misses) - 1e-9


def test_two_results_a_day_are_called_not_useful_with_the_reason(light_chain_study: Path) -> None:
    streams = read_plan(light_chain_study / "plan.toml").streams
    assert set(streams) == {"creatinine@line-1", "kappa@line-1"}
    for stream in streams.values():
        assert stream.verdict == "not useful here"
        assert stream.monitors == ()
        assert "the line makes 2 a day" in stream.reason
    told = done("appraise", "--lab", light_chain_study, "--workers", "1")
    assert "creatinine@line-1: not useful here" in told


def test_the_live_watch_of_real_results_raises_the_alarms_of_the_naive_monitor(hdl: Path) -> None:
    monitor, rows = only_monitor(hdl_plan(hdl)), hdl_rows(hdl)
    expected = naive_monitor.alarms(monitor, naive_monitor.path(monitor, naive_monitor.values(monitor, rows, "UTC")))
    lines = done("watch", "--from", str(hdl / "hdl.csv"), "--once", "--json", "--lab", hdl).splitlines()
    specimens = [json.loads(line)["specimen"] for line in lines if line.startswith("{")]
    assert specimens == [f"hdl-{i}" for i in expected]
