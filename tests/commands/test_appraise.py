"""`pbm appraise`: the same bytes whoever did the work, computed anew and compared, and what `--check` objects to."""

import json
import shutil
from datetime import timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from pbm.errors import InputError
from pbm.io.appraisal_file import read_appraisal
from pbm.io.tuning_file import write_tuning
from tests.commands.written_laboratory import FIRST, WrittenLaboratory, pbm
from tests.io.report import variants

LAB = """
[faults]
per_year = 7
[controls]
times = ["06:00", "14:00", "22:00"]
rules = ["1-3s", "2-2s", "R-4s"]
[analytes.sodium]
unit = "mmol/L"
step = 1
allowable_error = { absolute = 4.0 }
analytic_sd = { absolute = 0.9 }
controls.levels = [ { mean = 118, sd = 1.0 }, { mean = 150, sd = 1.2 } ]
faults = [ { sizes = [0.5, 1.0] }, { kind = "noise", sizes = [2.0] }, { kind = "drift", sizes = [1.0], over = "50 results" } ]
"""
LINES = ["line-1", "line-2", "line-3"]
EWMA: dict[str, Any] = {
    "statistic": "ewma",
    "weight": 0.1,
    "centre": 139.0,
    "limits": {"low": 136.3, "high": 141.7},
    "budget_per_day": 1 / 5,
    "spread": 3.0,
}
QUICKLY = ("--peers", "none")


@pytest.fixture(scope="module")
def appraised(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Three lines of thirty days, appraised with one worker and all comparisons but the slowest."""
    random = np.random.default_rng(7)
    results = {line: np.rint(random.normal(139, 3, 30 * 100)) for line in LINES}
    made = WrittenLaboratory.make(tmp_path_factory.mktemp("three-lines"), LAB, results, 100)
    made.plan(LINES, EWMA, held_out_from=FIRST + timedelta(15))
    found = pbm(made.folder, "appraise", "--workers", "1")
    assert found.exit_code == 0, f"{found.output}\n{found.exception!r}"
    return made.folder


@pytest.fixture
def folder(appraised: Path, tmp_path: Path) -> Path:
    """A copy of its own."""
    return Path(shutil.copytree(appraised, tmp_path / "lab"))


def changed(folder: Path, change: dict[str, Any]) -> Path:
    """The appraisal with other entries at the top or, by "stream.", of its first stream."""
    path = folder / "reports" / "appraisal.json"
    data = json.loads(path.read_text(encoding="utf-8"))
    for key, value in change.items():
        (data["streams"][0] if key.startswith("stream.") else data)[key.removeprefix("stream.")] = value
    path.write_text(json.dumps(data), encoding="utf-8")
    return path


def test_the_number_of_workers_does_not_change_a_byte(appraised: Path, folder: Path) -> None:
    assert pbm(folder, "appraise", "--workers", "2").exit_code == 0
    for name in ("appraisal.json", "appraisal.html"):
        assert (folder / "reports" / name).read_bytes() == (appraised / "reports" / name).read_bytes()


def test_an_appraisal_computed_anew_is_the_same(folder: Path) -> None:
    before = {path: path.read_bytes() for path in (folder / "reports").iterdir()}
    found = pbm(folder, "appraise", "--verify", str(folder / "reports" / "appraisal.json"))
    assert found.exit_code == 0, found.output
    assert "every figure of 3 streams is the same" in found.stdout
    assert {path: path.read_bytes() for path in (folder / "reports").iterdir()} == before, "nothing is written"


def test_an_appraisal_of_some_streams_with_another_seed_is_computed_anew_as_it_was_asked_for(folder: Path) -> None:
    assert pbm(folder, "appraise", "sodium@line-2", "--seed", "9", *QUICKLY).exit_code == 0
    written = folder / "reports" / "appraisal.json"
    assert [one.stream for one in read_appraisal(written).streams] == ["sodium@line-2"]
    found = pbm(folder, "appraise", "--verify", str(written))
    assert found.exit_code == 0 and "of 1 streams is the same" in found.stdout


def test_a_figure_that_was_changed_is_told_with_both_values(folder: Path) -> None:
    path = changed(folder, {"stream.onsets": 17})
    found = pbm(folder, "appraise", "--verify", str(path))
    assert found.exit_code == 1
    assert "1 entry differs" in found.stdout and "streams[sodium@line-1].onsets: 17 -> 400" in found.stdout


def test_another_plan_is_told_by_its_hash_and_by_what_it_changes(folder: Path) -> None:
    plan = folder / "plan.toml"
    plan.write_text(plan.read_text(encoding="utf-8").replace("141.7", "141.2"), encoding="utf-8")
    found = pbm(folder, "appraise", "--verify", str(folder / "reports" / "appraisal.json"))
    assert found.exit_code == 1
    assert "plan_sha256: " in found.stdout and "entries differ" in found.stdout and "and " in found.stdout


def test_another_version_of_the_tool_is_told_and_does_not_count(folder: Path) -> None:
    path = changed(folder, {"made_by": "pbm 0.0.1", "versions": {"python": "3.9.0"}})
    found = pbm(folder, "appraise", "--verify", str(path))
    assert found.exit_code == 0 and "Note: made_by" in found.stdout and "Note: versions.numpy" in found.stdout


def test_what_is_no_appraisal_is_refused_in_words(folder: Path) -> None:
    found = pbm(folder, "appraise", "--verify", str(folder / "lab.toml"))
    assert "does not hold an appraisal" in str(found.exception)
    gone = changed(folder, {"stream.stream": "sodium@line-9"})
    assert "no stream sodium@line-9" in str(pbm(folder, "appraise", "--verify", str(gone)).exception)


def test_check_passes_where_limits_are_kept_and_the_monitor_saves_something(folder: Path) -> None:
    found = pbm(folder, "appraise", "--check", *QUICKLY)
    assert found.exit_code == 0, found.output


def test_check_leaves_with_1_where_a_limit_was_not_kept(folder: Path) -> None:
    plan = folder / "plan.toml"
    plan.write_text(plan.read_text(encoding="utf-8").replace("141.7", "139.7"), encoding="utf-8")
    found = pbm(folder, "appraise", "--check", *QUICKLY)
    assert found.exit_code == 1
    assert "held-out days, the budget allows 3" in found.output
    assert (folder / "reports" / "appraisal.json").is_file(), "the appraisal is written all the same"


def test_check_leaves_with_1_where_a_monitor_does_more_harm_than_good(folder: Path) -> None:
    """It takes only results that no error of the list brings out, and alarms by chance."""
    plan = folder / "plan.toml"
    text = plan.read_text(encoding="utf-8").replace("budget_per_day = 0.2", "budget_per_day = 50.0")
    text = text.replace("centre = 139.0", "centre = 145.0").replace("136.3", "144.999").replace("141.7", "145.001")
    plan.write_text(text.replace("admit = {", "admit = { low = 144.5, high = 145.5,"), encoding="utf-8")
    found = pbm(folder, "appraise", "--check", *QUICKLY)
    assert found.exit_code == 1 and "more harm than good" in found.output


def test_json_on_the_terminal_is_what_is_written(folder: Path) -> None:
    found = pbm(folder, "appraise", "--json", *QUICKLY)
    assert json.loads(found.stdout) == json.loads((folder / "reports" / "appraisal.json").read_text(encoding="utf-8"))


def test_the_bench_is_the_sum_of_its_streams(appraised: Path) -> None:
    found = read_appraisal(appraised / "reports" / "appraisal.json")
    judged = [one.judged for one in found.streams if one.judged]
    alarms = [one.false_alarms for one in judged if one.false_alarms]
    assert len(judged) == len(alarms) == found.bench.streams == found.bench.monitors == 3
    assert found.bench.a_month.value == pytest.approx(sum(one.a_month.value for one in alarms), rel=1e-6)
    assert found.bench.allowed_a_month == pytest.approx(18, rel=1e-6)
    assert found.bench.unreliable.fewer.value == pytest.approx(
        sum(one.yearly.unreliable.fewer.value for one in judged), rel=1e-6
    )
    assert {one.yearly.per_year for one in judged} == {7.0}
    assert found.bench.unreliable.alone.low < found.bench.unreliable.alone.value < found.bench.unreliable.alone.high


def test_other_monitors_are_tried_within_the_same_budget(appraised: Path) -> None:
    for stream in read_appraisal(appraised / "reports" / "appraisal.json").streams:
        peers = stream.judged.peers if stream.judged else None
        assert peers is not None
        found = {one.name: one for one in peers.compared}
        assert list(found) == ["plan", "moving mean", "EWMA", "EWMA textbook", "ADWIN", "Page-Hinkley"]
        assert peers.faults == ("shift -1 TEa", "shift +1 TEa") and any("KSWIN" in one for one in peers.left_out)
        assert found["plan"].false_alarms == stream.judged.false_alarms
        assert all(one.unreliable.value <= peers.alone.value for one in found.values())
        assert {one.false_alarms.allowed for one in found.values()} == {3.0}


def test_the_report_tells_why_a_monitor_was_chosen_and_that_the_plan_was_edited_since(folder: Path) -> None:
    reports = folder / "reports"
    assert "Why this monitor" not in (reports / "appraisal.html").read_text(encoding="utf-8")
    write_tuning(reports / "tuning.json", variants.tuning(sodium__line_1=variants.reasons()))
    assert pbm(folder, "appraise", "sodium@line-1", *QUICKLY).exit_code == 0
    page = (reports / "appraisal.html").read_text(encoding="utf-8")
    assert "Why this monitor" in page
    assert "it was edited by hand" in page


def test_reasons_that_cannot_be_read_stop_it_in_words_before_the_work(folder: Path) -> None:
    (folder / "reports" / "tuning.json").write_text("{", encoding="utf-8")
    found = pbm(folder, "appraise", "sodium@line-1", *QUICKLY)
    assert isinstance(found.exception, InputError)
    assert "Run `pbm tune` again, or move the file away." in str(found.exception)
