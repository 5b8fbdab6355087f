"""Write docs/evidence/appraisal.md: appraisals of the invented laboratory against replays of fresh streams.

Run as `python -m tests.truth.evidence` at the top of the tree; it takes about half an hour.
"""

import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path

from typer.testing import CliRunner

from pbm.commands.main import app
from pbm.io.plan_file import read_plan
from synthetic_streams import write_laboratory
from tests.truth.comparison import Compared, compared

PAGE = Path(__file__).parents[2] / "docs" / "evidence" / "appraisal.md"
DAYS, SEED, FRESH_DAYS, FRESH_SEED, ONSETS = 120, 1, 120, 501, 200
RULES = 'rules = ["1-3s", "2-2s", "R-4s"]'
FAULTS = (("shift +1 TEa", "shift -1 TEa"), ("shift -0.75 TEa", "shift +0.75 TEa"))
FEWEST = 10  # unreliable results expected in all replays, below which they cannot tell
HEAD = f"""
# An appraisal against the truth

Written by `python -m tests.truth.evidence`; do not edit. The invented laboratory (seed {SEED}, {DAYS} days) was taken in, tuned
(`pbm tune --quick`) and appraised, without controls, since `pbm watch` runs the monitors alone. Then, in a fresh laboratory (seed
{FRESH_SEED}, {FRESH_DAYS} days, other patients, calibrations and lots), a shift was put into each stream at {ONSETS} onsets drawn among its
results, and each was replayed through `pbm watch`. Unreliable results are counted one by one: the invented laboratory knows every
patient's own value. Counted are results up to the alarm and ten more (the response lag), at most seven days.

*Inside*: the mean over the replays lies in the appraisal's 90 % interval, which counts the chance of the history's days and the wandering
of the level. *Agrees*: it lies in the interval widened by the chance of the {ONSETS} replays themselves (± is one standard error, from a
bootstrap over their days). Streams of which fewer than {FEWEST} unreliable results are to be expected in all replays are left out of the
second table. The faults tried in one stream, and the streams of one line, are not independent.

That the level wanders was not counted at first: of the shifts of 1 TEa then only 10 of 21 lay inside. How it is counted was settled on
these; the shifts of 0.75 TEa had no part in it.
"""


def made(folder: Path) -> None:
    """The laboratory in a folder: history, plan and appraisal."""
    write_laboratory(folder, days=DAYS, seed=SEED)
    lab = folder / "lab.toml"
    assert RULES in lab.read_text(encoding="utf-8")
    _run("intake", str(folder / "extract" / "export.csv"), "--lab", str(folder))
    _run("tune", "--quick", "--lab", str(folder))
    lab.write_text(lab.read_text(encoding="utf-8").replace(RULES, "rules = []"), encoding="utf-8")
    _run("appraise", "--peers", "none", "--lab", str(folder))
    (folder / "plan.toml").rename(folder / "tuned.toml")


def _run(*arguments: str) -> None:
    found = CliRunner().invoke(app, list(arguments))
    assert found.exit_code == 0, f"{found.output}\n{found.exception!r}"


def chosen(folder: Path, faults: tuple[str, str]) -> dict[str, str]:
    """Streams that are watched, with errors to one side and the other by turns."""
    watched = [name for name, one in read_plan(folder / "tuned.toml").streams.items() if one.monitors]
    return {name: faults[place % 2] for place, name in enumerate(sorted(watched))}


def page(rows: list[Compared]) -> Iterator[str]:
    """Lines of the page."""
    yield from HEAD.strip().splitlines()
    for what in dict.fromkeys(row.what for row in rows):
        of_it = [row for row in rows if row.what == what and ONSETS * row.said.value >= FEWEST]
        inside, agrees = sum(row.inside for row in of_it), sum(row.agrees for row in of_it)
        yield from ("", f"## {what[0].upper()}{what[1:]}", "")
        yield f"Inside: {inside} of {len(of_it)} ({inside / len(of_it):.0%}). Agrees: {agrees} of {len(of_it)} ({agrees / len(of_it):.0%})."
        yield from (
            "",
            "| stream | error | appraisal, 90 % interval | replays | inside | agrees |",
            "|---|---|---|---|---|---|",
        )
        yield from map(_row, of_it)


def _row(row: Compared) -> str:
    said = f"{row.said.value:.3g} ({row.said.low:.3g} to {row.said.high:.3g})"
    words = ["no", "yes"]
    return f"| {row.stream} | {row.fault} | {said} | {row.true:.3g} ± {row.error:.2g} | {words[row.inside]} | {words[row.agrees]} |"


def main() -> None:
    """Write the page."""
    with tempfile.TemporaryDirectory() as temporary:
        folder = Path(temporary) / "tern-bay"
        made(folder)
        rows: list[Compared] = []
        for faults in FAULTS:
            for row in compared(folder, chosen(folder, faults), ONSETS, FRESH_DAYS, FRESH_SEED):
                rows.append(row)
                sys.stderr.write(f"{_row(row)}\n")
    PAGE.parent.mkdir(parents=True, exist_ok=True)
    PAGE.write_text("\n".join(page(rows)) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
