"""Write docs/evidence/tuning.md: what `pbm tune` chooses, against what is best and what is common; limits on later days; the patient mix.

Run as `python -m tests.evidence.tuning` at the top of the tree. Sections run side by side, each as a process of its own.
"""

import subprocess
import sys
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from importlib.metadata import version
from pathlib import Path

TOP = Path(__file__).parents[2]
PAGE = TOP / "docs" / "evidence" / "tuning.md"
WORKERS = 2
HEAD = """
# Tuning: figures

Written by `python -m tests.evidence.tuning` from the modules in `tests/evidence/`; do not edit. Every draw is seeded in its module, so that
the same versions give the same figures on every machine (but for the last section, on cost); these are of {versions}.
"""
LIBRARIES = ("numpy", "scipy", "numba", "statsmodels", "river")
# Module and heading; a section that writes its own heading has none here.
SECTIONS = {
    "quality": "The chosen monitor and the best possible one",
    "honesty": "Limits on days that taught them nothing",
    "patient_mix": "",
    "peers": "General drift detectors and the plan's monitors",
    "cost": "What the search costs",
}


def written(module: str) -> str:
    """What a section's module writes."""
    command = [sys.executable, "-m", f"tests.evidence.{module}"]
    return subprocess.run(command, cwd=TOP, stdout=subprocess.PIPE, text=True, encoding="utf-8", check=True).stdout


def page(texts: Sequence[str]) -> str:
    """The whole page, from the text of each section."""
    versions = ", ".join(f"{name} {version(name)}" for name in LIBRARIES)
    parts = [HEAD.format(versions=versions)]
    for heading, text in zip(SECTIONS.values(), texts, strict=True):
        parts.append(f"## {heading}\n\n{text}" if heading else text)
    return "\n\n".join(part.strip() for part in parts) + "\n"


def main() -> None:
    """Write the page."""
    with ThreadPoolExecutor(WORKERS) as pool:
        PAGE.write_text(page(list(pool.map(written, SECTIONS))), encoding="utf-8")


if __name__ == "__main__":
    main()
