"""Rhythms of streams and analysers learned from a history and put into a plan."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from typer.testing import CliRunner

from pbm.commands.main import app
from pbm.commands.rhythms import with_rhythms
from pbm.io.plan_file import read_plan, write_plan
from pbm.records.plan import Plan, StreamPlan
from pbm.records.rhythm import Rhythm
from tests.live_laboratory import LAB_TOML, MADE, laboratory

DAYS, PER_DAY = 28, 60


@pytest.fixture(scope="module")
def history(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Four weeks of sodium on two lines and TSH on one of them, by day only."""
    folder = tmp_path_factory.mktemp("rhythms")
    (folder / "lab.toml").write_text(LAB_TOML, encoding="utf-8")
    random, parts = np.random.default_rng(8), []
    for test, line, unit in (
        ("sodium", "line-1", "mmol/L"),
        ("sodium", "line-2", "mmol/L"),
        ("tsh", "line-1", "mIU/L"),
    ):
        day = np.repeat(np.arange(DAYS), PER_DAY)
        at = pd.Timestamp("2031-01-06") + pd.to_timedelta(
            day * 86_400 + random.integers(8 * 3600, 18 * 3600, len(day)), "s"
        )
        part = {
            "reported_at": at.strftime("%Y-%m-%dT%H:%M:%SZ"),
            "test": test,
            "line": line,
            "result": 140,
            "unit": unit,
        }
        parts.append(pd.DataFrame(part | {"specimen": [f"{test}-{line}-{n}" for n in range(len(day))]}))
    whole = pd.concat(parts).assign(location="ED", kind="P", patient="")
    whole.loc[whole.test == "tsh", "result"] = 2
    whole.sort_values("reported_at").to_csv(folder / "extract.csv", index=False)
    done = CliRunner().invoke(app, ["intake", str(folder / "extract.csv"), "--lab", str(folder)])
    assert done.exit_code == 0, done.output
    return folder / "history"


def bare(*names: str) -> Plan:
    stream = StreamPlan(unit="mmol/L", verdict="not useful here", reason="for a test", results_per_day=PER_DAY)
    return Plan(made=MADE, streams=dict.fromkeys(names, stream))


def test_streams_and_their_analysers_get_a_rhythm_that_a_plan_holds_exactly(history: Path, tmp_path: Path) -> None:
    plan = with_rhythms(bare("sodium@line-1", "sodium@line-2", "tsh@line-1"), history, laboratory(), ["sodium@line-1"])
    write_plan(tmp_path / "plan.toml", plan)
    assert read_plan(tmp_path / "plan.toml") == plan
    assert plan.streams["sodium@line-1"].rhythm and not plan.streams["sodium@line-2"].rhythm
    assert list(plan.analysers) == ["line-1"], "only of what was tuned"


def test_a_rhythm_knows_the_night_and_an_analyser_has_the_results_of_all_its_streams(history: Path) -> None:
    plan = with_rhythms(bare("sodium@line-1"), history, laboratory(), ["sodium@line-1"])
    stream, analyser = plan.streams["sodium@line-1"].rhythm, plan.analysers["line-1"]
    assert isinstance(stream, Rhythm)
    assert sum(stream.by_hour[:24]) == pytest.approx(PER_DAY, rel=0.02)
    assert sum(analyser.by_hour[:24]) == pytest.approx(2 * PER_DAY, rel=0.02)
    assert max(stream.by_hour[h] for h in range(24) if not 6 <= h <= 18) == 0.0
    assert stream.false_per_day == pytest.approx(1 / 90, rel=1e-3)
    assert 3 < stream.quiet_at < 20


def test_of_too_few_results_no_rhythm_is_learned(history: Path) -> None:
    from pbm.stages.rhythm import learn_rhythm

    zone = laboratory().laboratory.zone
    assert learn_rhythm(np.zeros(0, dtype=np.int64), zone, 0.01) is None
    assert learn_rhythm(np.arange(1000, dtype=np.int64) * 60_000_000, zone, 0.01) is None, "less than a day"
