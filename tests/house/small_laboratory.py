"""The smallest laboratory that can be watched: the lab.toml of the README, a plan of one monitor, and a live file with a shift in it."""

from datetime import datetime, timedelta
from pathlib import Path

from tests.house.command_lines import fenced

README = Path(__file__).parents[2] / "README.md"
PLAN = """
[made]
by = "hand"
at = 2031-05-06T00:00:00Z
history = { first = 2031-01-06T00:00:00Z, last = 2031-05-05T23:59:59Z, rows = 42000, sha256 = "" }
seed = 1
lab_sha256 = ""

[streams."sodium@line-2"]
unit = "mmol/L"
verdict = "useful"
reason = "set by hand"
results_per_day = 350
[[streams."sodium@line-2".monitors]]
statistic = "ewma"
weight = 0.1
centre = 139.0
limits = { low = 137.0, high = 141.0 }
budget_per_day = 0.0333
spread = 3.0
"""


def readme_lab() -> str:
    """The complete lab.toml that the README shows."""
    return next(block for block in fenced(README.read_text(encoding="utf-8"), "toml") if "[laboratory]" in block)


def write_small_laboratory(folder: Path) -> None:
    """Write lab.toml, plan.toml and live.csv."""
    (folder / "lab.toml").write_text(readme_lab(), encoding="utf-8")
    (folder / "plan.toml").write_text(PLAN, encoding="utf-8")
    begin = datetime(2031, 5, 6, 8)
    rows = [
        f"{(begin + timedelta(minutes=4 * i)).isoformat()},NA,line-2,{139 + (i % 5 - 2) + 4 * (i >= 60)},mmol/L,S{i},ED,P"
        for i in range(100)
    ]
    (folder / "live.csv").write_text(
        "\n".join(["reported_at,test,line,result,unit,specimen,location,kind", *rows, ""]), encoding="utf-8"
    )
