"""`pytest tests/published` lists every check with the number of its figures and their sources."""

import json
import os
import tempfile
from collections import defaultdict
from pathlib import Path

import pytest

from tests.published.record import ROWS

_OURS = pytest.StashKey[str]()


def _asked_alone(config: pytest.Config) -> bool:
    return bool(config.args) and all(Path(arg).parts[-1:] == ("published",) for arg in config.args)


def pytest_configure(config: pytest.Config) -> None:
    """Have the rows written down for the list, unless somebody else wants them; workers inherit the name of the file."""
    if _asked_alone(config) and ROWS not in os.environ:
        handle, os.environ[ROWS] = tempfile.mkstemp(suffix=".jsonl")
        os.close(handle)
        config.stash[_OURS] = os.environ[ROWS]


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter, config: pytest.Config) -> None:
    """The list, at the end of the run."""
    if (path := config.stash.get(_OURS, "")) == "":
        return
    checks: dict[str, list[str]] = defaultdict(list)
    for line in Path(path).read_text(encoding="utf-8").splitlines():
        row = json.loads(line)
        checks[row["test"].removeprefix("tests/published/").split("[")[0]].append(row["source"])
    terminalreporter.section("checked against print")
    for name, sources in sorted(checks.items()):
        terminalreporter.write_line(f"{name}: {len(sources)} figures. {'; '.join(dict.fromkeys(sources))}")
    Path(path).unlink()
    del os.environ[ROWS]
