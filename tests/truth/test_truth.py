"""The small version of docs/evidence/appraisal.md: two streams, forty onsets each, replayed through `pbm watch`."""

import numpy as np
import pytest
from typer.testing import CliRunner

from pbm.commands.main import app
from synthetic_streams import write_laboratory
from tests.truth.comparison import Compared, Z, compared
from tests.truth.evidence import RULES

CHOSEN = {"sodium@line-2": "shift +1 TEa", "potassium@line-1": "shift -1 TEa"}


def pbm(*arguments: str) -> None:
    found = CliRunner().invoke(app, list(arguments))
    assert found.exit_code == 0, f"{found.output}\n{found.exception!r}"


@pytest.fixture(scope="module")
def replays(tmp_path_factory: pytest.TempPathFactory) -> list[Compared]:
    """An EWMA on two streams of the invented laboratory, appraised without controls, and fresh streams under known faults."""
    folder = tmp_path_factory.mktemp("truth")
    write_laboratory(folder, days=30, volume=0.5, seed=3)
    lab = ("--lab", str(folder))
    pbm("intake", str(folder / "extract" / "export.csv"), *lab)
    pbm("tune", *CHOSEN, "--statistic", "ewma", "--weight", "0.05", "--no-mix", "--workers", "1", *lab)
    text = (folder / "lab.toml").read_text(encoding="utf-8")
    (folder / "lab.toml").write_text(text.replace(RULES, "rules = []"), encoding="utf-8")
    pbm("appraise", *CHOSEN, "--peers", "none", "--workers", "1", *lab)
    (folder / "plan.toml").rename(folder / "tuned.toml")
    return list(compared(folder, CHOSEN, onsets=40, days=30, seed=501))


def test_results_until_the_alarm_and_unreliable_results_are_what_was_said(replays: list[Compared]) -> None:
    assert [row.what for row in replays] == ["results until the alarm", "unreliable results"] * 2
    for row in replays:
        error = float(np.hypot(row.error, (row.said.high - row.said.low) / (2 * Z)))
        assert abs(row.true - row.said.value) < 3.5 * error, row
        assert row.error < 0.5 * row.said.value, "forty replays can tell"


def test_faults_replayed_are_found_and_cost_something(replays: list[Compared]) -> None:
    assert all(1 < row.true < 500 for row in replays)
