"""`pbm tune`: monitors set by hand, plans kept, and what is refused."""

import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from typer.testing import CliRunner, Result

from pbm.commands.main import app
from pbm.io.plan_file import read_plan
from pbm.io.tuning_file import read_tuning
from pbm.records.plan import MonitorPlan

LAB = """
[laboratory]
name = "One stream"
timezone = "Atlantic/Azores"
[extract]
time = "at"
analyte = "test"
analyser = "line"
value = "result"
[controls]
times = ["06:00", "14:00", "22:00"]
rules = ["1-3s", "2-2s", "R-4s"]
[analytes.sodium]
unit = "mmol/L"
step = 1
allowable_error = { absolute = 4.0 }
analytic_sd = { absolute = 0.9 }
controls.levels = [ { mean = 118, sd = 1.0 }, { mean = 150, sd = 1.2 } ]
faults = [ { sizes = [1.0] } ]
"""


def pbm(folder: Path, *arguments: str) -> Result:
    return CliRunner().invoke(app, [*arguments, "--lab", str(folder)])


@pytest.fixture(scope="module")
def laboratory(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Thirty days of 200 independent results a day."""
    folder = tmp_path_factory.mktemp("one-stream")
    (folder / "lab.toml").write_text(LAB, encoding="utf-8")
    random = np.random.default_rng(4)
    at = pd.Timestamp("2031-01-06") + pd.to_timedelta(np.sort(random.integers(0, 30 * 86_400, 6_000)), unit="s")
    result = np.rint(random.normal(139, 3.8, 6_000)).astype(int)
    extract = pd.DataFrame(
        {"at": at.strftime("%Y-%m-%dT%H:%M:%SZ"), "test": "sodium", "line": "line-1", "result": result}
    )
    extract.to_csv(folder / "extract.csv", index=False)
    assert pbm(folder, "intake", str(folder / "extract.csv")).exit_code == 0
    return folder


def monitor(folder: Path) -> MonitorPlan:
    (found,) = read_plan(folder / "plan.toml").streams["sodium@line-1"].monitors
    return found


def test_what_is_set_by_hand_stands_in_the_plan(laboratory: Path) -> None:
    by_hand = ("--admit", "125:155", "--winsorize", "--statistic", "ewma", "--weight", "0.07", "--no-mix")
    assert pbm(laboratory, "tune", "sodium@line-1", *by_hand).exit_code == 0
    found = monitor(laboratory)
    assert (found.admit.low, found.admit.high, found.admit.mode) == (125, 155, "winsorize")
    assert (found.statistic, found.weight, found.baseline) == ("ewma", 0.07, None)


def test_keep_learns_the_limits_of_an_edited_plan_anew_and_changes_nothing_else(laboratory: Path) -> None:
    assert pbm(laboratory, "tune", "--statistic", "ewma", "--weight", "0.07", "--no-mix").exit_code == 0
    before = monitor(laboratory)
    plan = laboratory / "plan.toml"
    plan.write_text(plan.read_text().replace("weight = 0.07", "weight = 0.2"))
    assert pbm(laboratory, "tune", "--keep").exit_code == 0
    after = monitor(laboratory)
    assert after.weight == 0.2
    assert after.limits.ends[1] > before.limits.ends[1]
    assert (after.admit, after.transform, after.baseline) == (before.admit, before.transform, before.baseline)
    assert pbm(laboratory, "tune", "--keep").exit_code == 0
    assert monitor(laboratory) == after


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("--admit", "155:125"), "LOW below HIGH"),
        (("--admit", "low:high"), "--admit takes LOW:HIGH"),
        (("--winsorize",), "--winsorize says what happens beyond --admit"),
        (("--transform", "sqrt"), "none, log or boxcox"),
        (("--weight", "0.05"), "goes with --statistic"),
        (("--statistic", "ewma", "--weight", "0.05", "--window", "20"), "found --weight and --window"),
        (("sodium@line-9",), "There is no stream sodium@line-9"),
    ],
)
def test_what_cannot_be_is_said_in_one_paragraph(laboratory: Path, arguments: tuple[str, ...], said: str) -> None:
    result = pbm(laboratory, "tune", *arguments)
    assert said in str(result.exception)


def test_a_reference_by_hand_makes_a_cusum(laboratory: Path) -> None:
    assert pbm(laboratory, "tune", "--statistic", "cusum", "--reference", "0.4", "--no-mix", "--quick").exit_code == 2
    by_hand = ("--admit", "125:155", "--statistic", "cusum", "--reference", "0.4", "--no-mix")
    assert pbm(laboratory, "tune", *by_hand).exit_code == 0
    assert (monitor(laboratory).statistic, monitor(laboratory).reference) == ("cusum", 0.4)


def test_why_a_monitor_was_chosen_stands_beside_the_plan(laboratory: Path) -> None:
    assert pbm(laboratory, "tune", "--quick", "--no-mix").exit_code == 0
    found = read_tuning(laboratory / "reports" / "tuning.json")
    assert found is not None
    (stream,) = found.streams.values()
    assert stream.searches[0].candidates > 90
    assert pbm(laboratory, "tune", "--keep").exit_code == 0
    assert read_tuning(laboratory / "reports" / "tuning.json") == found, "no search, no new reasons"


def test_a_stream_that_fails_says_why_and_leaves_with_two(laboratory: Path) -> None:
    before = (laboratory / "plan.toml").read_bytes()
    result = pbm(laboratory, "tune", "sodium@line-1", "--transform", "boxcox")
    assert result.exit_code == 2
    assert "sodium@line-1 failed: These results are not skewed" in result.stderr
    assert (laboratory / "plan.toml").read_bytes() == before


def test_a_fleet_budget_is_shared_told_and_stands_in_the_plan(laboratory: Path, tmp_path: Path) -> None:
    shutil.copytree(laboratory, tmp_path / "lab")
    lab = tmp_path / "lab" / "lab.toml"
    lab.write_text(lab.read_text() + '\n[alarms]\nfleet_budget = "1 per 100 days"\n')
    by_hand = ("--statistic", "ewma", "--weight", "0.1", "--no-mix")
    result = pbm(tmp_path / "lab", "tune", *by_hand)
    assert result.exit_code == 0
    assert "Fleet budget, 1 per 100 days, shared where it saves most" in result.stdout
    shared = monitor(tmp_path / "lab")
    assert shared.budget_per_day == pytest.approx(0.01)
    assert pbm(laboratory, "tune", *by_hand).exit_code == 0
    assert shared.limits.ends[1] > monitor(laboratory).limits.ends[1]


@pytest.mark.parametrize("arguments", [("appraise",), ("tune", "--keep")])
def test_what_needs_a_plan_says_that_tune_makes_it(
    laboratory: Path, tmp_path: Path, arguments: tuple[str, ...]
) -> None:
    shutil.copytree(laboratory, tmp_path / "lab")
    (tmp_path / "lab" / "plan.toml").unlink(missing_ok=True)
    result = pbm(tmp_path / "lab", *arguments)
    assert "Run `pbm tune` first" in str(result.exception)


def test_keep_refuses_a_plan_in_another_unit(laboratory: Path, tmp_path: Path) -> None:
    assert pbm(laboratory, "tune", "--statistic", "ewma", "--weight", "0.1", "--no-mix").exit_code == 0
    shutil.copytree(laboratory, tmp_path / "lab")
    plan = tmp_path / "lab" / "plan.toml"
    plan.write_text(plan.read_text().replace('unit = "mmol/L"', 'unit = "mg/dL"'))
    result = pbm(tmp_path / "lab", "tune", "--keep")
    assert result.exit_code == 2
    assert "plan.toml gives sodium@line-1 in mg/dL, lab.toml in mmol/L" in result.stderr


def test_the_demo_does_not_write_where_something_is(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("mine")
    for taken in (tmp_path, tmp_path / "file"):
        result = CliRunner().invoke(app, ["demo", str(taken)])
        assert "is there already" in str(result.exception)
    assert (tmp_path / "file").read_text() == "mine"
