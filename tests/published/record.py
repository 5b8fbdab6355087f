"""One line of evidence: a quantity from outside the project, and what the project's code gives for it."""

import json
import os
from pathlib import Path


def published(quantity: str, source: str, expected: float, ours: float, tolerance: float) -> None:
    """Assert that ours lies within the tolerance of the published value, and append the row to the file that PBM_EVIDENCE names, if set."""
    row = {"quantity": quantity, "source": source, "published": expected, "ours": ours, "tolerance": tolerance}
    if path := os.environ.get("PBM_EVIDENCE"):
        with Path(path).open("a", encoding="utf-8") as file:
            file.write(json.dumps(row) + "\n")
    assert abs(ours - expected) <= tolerance, f"{quantity}: published {expected}, ours {ours}, tolerance {tolerance} ({source})"
