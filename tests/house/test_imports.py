"""Who may import whom: the contracts in pyproject.toml hold on the tree."""

import subprocess
import sys
from pathlib import Path

import pytest

TOP = Path(__file__).parents[2]


def test_every_import_keeps_to_the_floors_of_the_house():
    pytest.importorskip("importlinter", reason="comes with the extra `dev`; .ci/run checks the contracts there")
    command = [
        sys.executable,
        "-c",
        "import sys; from importlinter.cli import lint_imports; sys.exit(lint_imports(no_cache=True))",
    ]
    found = subprocess.run(command, cwd=TOP, capture_output=True, text=True, check=False)
    assert found.returncode == 0, found.stdout
    assert " 0 broken" in found.stdout
