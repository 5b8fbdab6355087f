"""What the search of `pbm tune` costs on the machine at hand: seconds, beside pandas and numpy, and as history and candidates grow.

Run as `python -m tests.evidence.cost`.
"""

import os
import sys

from tests.benchmarks.test_tuning_speed import Race, ground, growth, of_process, search_of


def section() -> str:
    """The text."""
    search = search_of(ground(100_000))
    first = of_process(search.run)
    found = search.run()
    if found is None:
        raise RuntimeError("the search found nothing on 100,000 normal results")
    again = of_process(search.run)
    grown = {what: growth(what) for what in ("history", "candidates")}
    rows = [f"| {what} | " + " | ".join(f"{one / took[0]:.2f}" for one in took) + " |" for what, took in grown.items()]
    return "\n".join(
        [
            "These figures are of the machine that wrote the page (a shared one with "
            f"{os.cpu_count()} processors), in seconds of one processor; another gives others.",
            "",
            f"One stream of 100,000 results, {found.rounds[0][0]} candidates, 10 sizes to either side, all three rounds: {again:.1f} s, "
            f"and {first:.1f} s in a new process, which compiles the loops first. Asked for: at most 20 s.",
            "",
            "Eight candidates of it (EWMA, moving mean, moving median, CUSUM), first round, against the same written with pandas and numpy "
            f"(`tests/benchmarks/naive_search.py`; the scores agree): {Race().ratio():.0f} times as fast. Asked for: 30.",
            "",
            "Time of the first round, as a multiple, when history or candidates grow:",
            "",
            "| | 1 | 2 times | 4 times | 8 times |",
            "|---|---|---|---|---|",
            *rows,
        ]
    )


if __name__ == "__main__":
    sys.stdout.write(f"{section()}\n")
