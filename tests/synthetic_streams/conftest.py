"""One laboratory in memory and one in a folder, shared by the tests of this room."""

import csv
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from synthetic_streams import Laboratory, write_laboratory

DAYS = 21
VOLUME = 0.4
SEED = 7


@dataclass(frozen=True)
class Written:
    """A written folder and its export read back naively: rows of fields with their source lines."""

    folder: Path
    rows: list[tuple[int, list[str]]]
    blank_lines: int
    truth: dict[str, Any]


@pytest.fixture(scope="session")
def laboratory() -> Laboratory:
    return Laboratory(days=56, seed=3)


@pytest.fixture(scope="session")
def written(tmp_path_factory: pytest.TempPathFactory) -> Written:
    folder = tmp_path_factory.mktemp("tern-bay")
    write_laboratory(folder, DAYS, VOLUME, SEED)
    lines = (folder / "extract" / "export.csv").read_text(encoding="utf-8").splitlines()
    numbered = [(number, line) for number, line in enumerate(lines, start=1)][1:]
    rows = [(number, next(csv.reader([line]))) for number, line in numbered if line]
    truth = json.loads((folder / "truth.json").read_text(encoding="utf-8"))
    return Written(folder, rows, len(numbered) - len(rows), truth)
