"""How fast `pbm watch` is: start-up, and results a second from a CSV file and from NDJSON, kept durably. Run by hand: it prints figures.

python -m tests.benchmarks.watch_speed [RESULTS]
"""

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from pbm.records.plan import Plan
from tests.commands.test_watch import RUN, csv, ndjson
from tests.live_laboratory import ewma, plan, two_lines, write_folder


def main(count: int) -> None:
    """Time a run over one result and over so many of three streams, by both doors."""
    some = two_lines(1, count)
    with tempfile.TemporaryDirectory() as place:
        for name, text, source in (("CSV", csv(some), "live.csv"), ("NDJSON", ndjson(some), "-")):
            folder = write_folder(Path(place) / name, rarely_alarming())
            first = timed(folder, "".join(text.splitlines(keepends=True)[:2]), source)
            whole = timed(folder, text, source)
            size = (folder / "watch.sqlite").stat().st_size / count
            elapsed, processor = (count / (after - before) for before, after in zip(first, whole, strict=True))
            sys.stdout.write(
                f"{name}: start and stop {first[0]:.2f} s ({first[1]:.2f} s of a processor); after the start {elapsed:,.0f} results "
                f"a second ({processor:,.0f} a second of a processor); {size:.0f} bytes a result in the store\n"
            )


def rarely_alarming() -> Plan:
    """A monitor by EWMA, by moving mean and by moving median, with limits so wide that alarms are as rare as in a laboratory."""
    wide = {"low": 130.0, "high": 150.0}
    mean, median = (ewma(statistic=name, weight=None, window=50, limits=wide) for name in ("mean", "median"))
    tsh = ewma(0.5, 3.0, transform="log", admit={"low": 0.2, "high": 8.0}, spread=0.6)
    return plan(sodium_line_1=[mean], sodium_line_2=[median], tsh_line_1=[tsh])


def timed(folder: Path, text: str, source: str) -> tuple[float, float]:
    """Seconds of one run of the command over a text: elapsed, and of a processor."""
    (folder / "live.csv").write_text(text)
    command = [*RUN, "watch", "--from", str(folder / source) if source != "-" else "-", "--lab", str(folder), "--once"]
    with (folder / "live.csv").open() as given:
        start, used = time.perf_counter(), processor_seconds()
        subprocess.run(command, stdin=given, capture_output=True, check=True)
        return time.perf_counter() - start, processor_seconds() - used


def processor_seconds() -> float:
    """Processor time of the commands run so far."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 120_000)
