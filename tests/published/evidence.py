"""Write docs/evidence/published.md from the tests against print: quantity, source, published, ours, tolerance.

Run as `python -m tests.published.evidence` at the top of the tree.
"""

import importlib
import json
import os
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from inspect import cleandoc, getdoc
from itertools import groupby
from pathlib import Path
from typing import Any

from tests.published.record import ROWS

TOP = Path(__file__).parents[2]
PAGE = TOP / "docs" / "evidence" / "published.md"
HEAD = """
# Checked against print

Written by `python -m tests.published.evidence` from the tests in `tests/published/`; do not edit. Each line is a figure that others
printed, or that unrelated code or a closed form gives, beside what the tool computes. The tolerance is absolute; it holds half a unit of
the last printed place, and 3.5 standard errors where the tool simulates. READ: the printed figure was read. MEM: quoted from memory.
REPRO: reproduced by an independent computation.
"""
WORDS = {"ewma": "EWMA", "cusum": "CUSUM", "tea": "TEa", "sd": "SD", "poisson": "Poisson", "n": "N"}
Row = dict[str, Any]


def collected() -> list[Row]:
    """Run the tests and return their rows in the order of files and lines."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "rows.jsonl"
        command = [sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", "-n", "0", "tests/published"]
        run = subprocess.run(command, cwd=TOP, env={**os.environ, ROWS: str(path)}, check=False)
        if run.returncode:
            sys.exit("the tests against print did not pass: docs/evidence/published.md is left as it was")
        return [json.loads(line) for line in path.read_text().splitlines()]


def page(rows: list[Row]) -> Iterator[str]:
    """Lines of the page."""
    yield from HEAD.strip().splitlines()
    checked = len({row["test"].split("[")[0] for row in rows})
    yield from ("", f"{len(rows)} figures in {checked} checks.")
    for file, of_file in groupby(rows, key=lambda row: row["test"].split("::")[0]):
        yield from ("", f"## {title(importlib.import_module(file.removesuffix('.py').replace('/', '.')))}")
        for name, of_test in groupby(of_file, key=lambda row: row["test"].split("[")[0]):
            yield from section(name, list(of_test))


def section(name: str, rows: list[Row]) -> Iterator[str]:
    """One check: its sentence, what its docstring says of it, and its table."""
    file, function = name.split("::")
    module = importlib.import_module(file.removesuffix(".py").replace("/", "."))
    yield from ("", f"### {sentence(function)}", "")
    if text := getdoc(getattr(module, function)):
        yield from (*cleandoc(text).splitlines(), "")
    if len({row["source"] for row in rows}) == 1:
        yield from (f"Source: {rows[0]['source']}", "")
        yield from table(rows, ("quantity", "published", "ours", "tolerance"))
    else:
        yield from table(rows, ("quantity", "source", "published", "ours", "tolerance"))


def table(rows: list[Row], columns: tuple[str, ...]) -> Iterator[str]:
    """Rows as a Markdown table."""
    yield f"| {' | '.join(columns)} |"
    yield "|---" * len(columns) + "|"
    for row in rows:
        shown = {**row, "ours": f"{row['ours']:.10g}", "tolerance": f"{row['tolerance']:.2g}"}
        yield f"| {' | '.join(str(shown[column]).replace('|', '/') for column in columns)} |"


def sentence(function: str) -> str:
    """A test's name as a sentence."""
    words = [WORDS.get(word, word) for word in function.removeprefix("test_").split("_")]
    return words[0][0].upper() + " ".join(words)[1:]


def title(module: object) -> str:
    """First line of a module's docstring."""
    return (getdoc(module) or "").splitlines()[0].rstrip(".")


def main() -> None:
    """Write the page."""
    lines = list(page(collected()))
    PAGE.parent.mkdir(parents=True, exist_ok=True)
    PAGE.write_text("\n".join(lines) + "\n")


if __name__ == "__main__":
    main()
