"""The reference pages are those that the code would write now."""

import os
import subprocess
import sys

from tests.house import reference


def test_the_reference_is_in_step_with_the_code():
    written = {path.name: path.read_text(encoding="utf-8") for path in reference.FOLDER.iterdir()}
    assert written == reference.pages(), "run `python -m tests.house.reference` and look at what changed"


def test_the_reference_does_not_depend_on_the_terminal():
    command = [sys.executable, "-c", "from tests.house.reference import pages; print(pages())"]
    narrow, wide = (
        subprocess.run(
            command, cwd=reference.TOP, env={**os.environ, "COLUMNS": width}, capture_output=True, check=True
        )
        for width in ("20", "200")
    )
    assert narrow.stdout == wide.stdout
