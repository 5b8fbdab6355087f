"""A laboratory written file by file for the command line: extract, lab.toml and a plan of one's own, without a search."""

import json
from dataclasses import dataclass
from datetime import UTC, date, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from typer.testing import CliRunner, Result

from pbm.commands.main import app
from pbm.io.plan_file import write_plan
from pbm.methods.jit import Floats
from pbm.records.plan import HistoryMark, Made, MonitorPlan, Plan, StreamPlan

FIRST = date(2031, 1, 6)
HEAD = """
[laboratory]
name = "Tern Bay District Laboratory"
timezone = "UTC"
[extract]
time = "at"
analyte = "test"
analyser = "line"
value = "result"
"""


def pbm(folder: Path, *arguments: str) -> Result:
    """Run the command on the laboratory's folder."""
    return CliRunner().invoke(app, [*arguments, "--lab", str(folder)])


def appraised(folder: Path, *arguments: str) -> dict[str, Any]:
    """`pbm appraise --json` of a laboratory, which must succeed."""
    found = pbm(folder, "appraise", "--json", "--peers", "none", "--workers", "1", *arguments)
    assert found.exit_code == 0, f"{found.output}\n{found.exception!r}"
    return dict(json.loads(found.stdout))


@dataclass(frozen=True)
class WrittenLaboratory:
    """A folder with results of some lines, evenly spread over each day."""

    folder: Path

    @classmethod
    def make(cls, folder: Path, lab: str, results: dict[str, Floats], per_day: int) -> "WrittenLaboratory":
        """Write lab.toml and an extract of sodium results by line, and take it in."""
        folder.mkdir(exist_ok=True)
        (folder / "lab.toml").write_text(HEAD + lab, encoding="utf-8")
        parts = [_rows(line, value, per_day) for line, value in results.items()]
        pd.concat(parts).to_csv(folder / "extract.csv", index=False)
        taken = pbm(folder, "intake", str(folder / "extract.csv"))
        assert taken.exit_code == 0, taken.output
        return cls(folder)

    def plan(self, lines: list[str], *monitors: dict[str, Any], held_out_from: date) -> None:
        """Write a plan with these monitors for each line."""
        stream = StreamPlan(
            unit="mmol/L",
            verdict="useful",
            reason="written by hand",
            results_per_day=1.0,
            held_out_from=held_out_from,
            monitors=tuple(MonitorPlan(**one) for one in monitors),
        )
        at = datetime(2031, 6, 1, tzinfo=UTC)
        made = Made(
            by="a test", at=at, history=HistoryMark(first=at, last=at, rows=1, sha256=""), seed=1, lab_sha256=""
        )
        write_plan(self.folder / "plan.toml", Plan(made=made, streams={f"sodium@{line}": stream for line in lines}))


def _rows(line: str, value: Floats, per_day: int) -> pd.DataFrame:
    since = pd.to_timedelta((np.arange(len(value)) + 0.5) * 86_400e3 / per_day, unit="ms")
    at = (pd.Timestamp(FIRST) + since).strftime("%Y-%m-%dT%H:%M:%S.%fZ")
    return pd.DataFrame({"at": at, "test": "sodium", "line": line, "result": np.round(value, 3)})
