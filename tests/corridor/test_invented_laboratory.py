"""The whole job on the invented laboratory, whose truth is known."""

import json
import shutil
from pathlib import Path

import pytest

from pbm.io.plan_file import read_plan
from pbm.records.plan import Plan
from tests.corridor.conftest import done

pytestmark = pytest.mark.slow


def copied(folder: Path, to: Path) -> Path:
    """The laboratory with its history in a folder of its own."""
    return Path(shutil.copytree(folder, to / "lab"))


def decided(folder: Path) -> Plan:
    """The plan but for the moment at which it was made."""
    plan = read_plan(folder / "plan.toml")
    return plan.model_copy(update={"made": plan.made.model_copy(update={"at": None})})


STREAMS = ("calcium@line-1", "tsh@immuno-1")


def test_the_account_of_intake_is_the_truth_of_the_generator(tern_bay: Path, tmp_path: Path) -> None:
    shutil.copy(tern_bay / "lab.toml", tmp_path)
    account = json.loads(done("intake", tern_bay / "extract" / "export.csv", "--lab", tmp_path, "--json"))
    truth = json.loads((tern_bay / "truth.json").read_text())["export"]
    assert account["taken"] == truth["taken"]
    assert (
        account["rows"] == account["taken"] + sum(account["left_out"].values()) == truth["rows"] + truth["blank_lines"]
    )
    true = truth["left_out"]
    assert account["left_out"] == {
        "not a patient result": true["control"] + true["proficiency"],
        "rerun of the specimen": true["rerun"],
        "duplicate": true["exact_duplicate"],
        "unit is not mmol/L": true["other_unit"],
        "not a number": true["comment"],
        "unknown test": true["unmapped_test"],
        "blank line": truth["blank_lines"],
        "wrong number of columns": true["wrong_field_count"],
    }


def test_plan_and_appraisal_do_not_depend_on_the_number_of_workers_and_are_the_same_for_the_same_seed(
    tern_bay: Path, tmp_path: Path
) -> None:
    folder = copied(tern_bay, tmp_path)
    outcomes = []
    for workers in ("1", "2"):
        done("tune", "--quick", *STREAMS, "--lab", folder, "--workers", workers)
        done("appraise", *STREAMS, "--lab", folder, "--workers", workers)
        text = json.loads((folder / "reports" / "appraisal.json").read_text())
        text.pop("plan_sha256")  # the plan holds the moment at which it was made
        outcomes.append((decided(folder), text))
        (folder / "plan.toml").unlink()
    assert outcomes[0] == outcomes[1]
    done("tune", "--quick", *STREAMS, "--lab", folder, "--seed", "2")
    assert decided(folder) != outcomes[0][0]


def test_sodium_is_useful_and_halves_the_worst_case(tern_bay: Path, tmp_path: Path) -> None:
    folder = copied(tern_bay, tmp_path)
    done("tune", "--quick", "sodium@line-2", "--lab", folder)
    done("appraise", "--lab", folder)
    (stream,) = json.loads((folder / "reports" / "appraisal.json").read_text())["streams"]
    worst = stream["judged"]["worst_unreliable"]
    assert stream["verdict"] == "useful"
    assert worst["with_monitor"]["value"] < 0.5 * worst["alone"]["value"]


def test_the_live_error_is_found_after_its_onset_and_before_it_has_cost_what_the_schedule_alone_would(
    tern_bay: Path, tmp_path: Path
) -> None:
    folder = copied(tern_bay, tmp_path)
    done("tune", "--quick", "sodium@line-2", "--lab", folder)
    lines = done("watch", "--from", str(folder / "live.csv"), "--once", "--json", "--lab", folder).splitlines()
    alarms = [json.loads(line) for line in lines if line.startswith("{")]
    (fault,) = json.loads((folder / "faults.json").read_text())["faults"]
    after = [a for a in alarms if a["stream"] == "sodium@line-2" and a["time"] >= fault["onset"]]
    assert after and after[0]["side"] == "HIGH"
