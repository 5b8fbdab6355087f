"""How much memory `pbm tune` takes on a laboratory of 60 streams and ten million results. Run by hand: it prints figures.

python -m tests.benchmarks.tune_memory [STREAMS [RESULTS [OPTION...]]]

The whole history lies in the folder; so many of its streams are tuned by two workers, with the options given. Counted is the memory
that the command and its workers hold at the moment when it is most; what they share, such as libraries, counts once ("proportional set
size" of Linux).
"""

import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pyarrow as pa

from pbm.io.history_writer import HistoryWriter
from pbm.records.intake import LEFT_OUT_SCHEMA, RESULT_SCHEMA, ParsedBlock, Sifted
from pbm.records.sex_and_age import AGE_BANDS
from pbm.records.stream import StreamName
from tests.commands.many_streams import FIRST
from tests.commands.test_tune import LAB

STREAMS, RESULTS, DAYS = 60, 10_000_000, 365
RUN = [sys.executable, "-c", "from pbm.commands.main import main; main()"]
MEGABYTE = 1024 * 1024


def main(tuned: int, results: int, options: list[str]) -> None:
    """Write the laboratory, tune some of its streams, and print the largest memory."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        (folder / "lab.toml").write_text(LAB, encoding="utf-8")
        names = [StreamName("sodium", f"line-{number:02}") for number in range(STREAMS)]
        write(folder / "history", names, results // STREAMS)
        command = [*RUN, "tune", *map(str, names[:tuned]), "--workers", "2", "--lab", str(folder), *options]
        begun = time.monotonic()
        largest = watched(command)
        sys.stdout.write(
            f"{results:,} results in {STREAMS} streams, {tuned} of them tuned by 2 workers in {time.monotonic() - begun:.0f} s: "
            f"at most {sum(largest) / MEGABYTE:.0f} MB in all; the command {largest[0] / MEGABYTE:.0f} MB, its workers "
            f"{' and '.join(f'{one / MEGABYTE:.0f}' for one in sorted(largest[1:], reverse=True))} MB\n"
        )


def write(history: Path, names: list[StreamName], size: int) -> None:
    """Streams of so many results over a year, with specimen, ward, sex and age."""
    with HistoryWriter(history) as writer:
        for number, name in enumerate(names):
            writer.add(block(name, size, np.random.default_rng(number)))
        for _ in writer.merge(lambda _, results: Sifted(results, LEFT_OUT_SCHEMA.empty_table())):
            pass
        writer.put_in_place([])


def block(name: StreamName, size: int, random: np.random.Generator) -> ParsedBlock:
    """Rows of one stream."""
    wards = [f"ward {number}" for number in range(20)]
    ward = random.integers(0, 20, size)
    columns = {
        "time": np.sort(random.integers(FIRST, FIRST + DAYS * 86_400_000_000, size)),
        "value": np.rint(random.normal(139 + ward / 10, 3.8)),
        "censor": np.zeros(size, np.int8),
        "line": np.arange(size),
        "specimen": [f"{name.analyser}-{number}" for number in range(size)],
        "ward": np.array(wards)[ward],
        "sex": random.choice(["F", "M"], size),
        "age": random.choice(AGE_BANDS, size),
    }
    arrays = [pa.array(columns.get(field.name, [""] * size)).cast(field.type) for field in RESULT_SCHEMA]
    return ParsedBlock(pa.table(arrays, schema=RESULT_SCHEMA), ((name, size),), LEFT_OUT_SCHEMA.empty_table())


def watched(command: list[str]) -> list[int]:
    """Run a command; bytes held by each of its processes at the moment when their sum was largest, its own first."""
    largest: list[int] = []
    with subprocess.Popen(command, stdout=subprocess.DEVNULL, start_new_session=True) as run:
        while run.poll() is None:
            now = [held(process) for process in (run.pid, *descendants(run.pid))]
            largest = max(largest, now, key=sum)
            time.sleep(0.05)
    if run.returncode:
        raise SystemExit(run.returncode)
    return largest


def descendants(process: int) -> Iterator[int]:
    """The processes that a process started, and theirs."""
    try:
        text = "".join(path.read_text() for path in Path(f"/proc/{process}/task").glob("*/children"))
    except OSError:
        return
    for child in map(int, text.split()):
        yield child
        yield from descendants(child)


def held(process: int) -> int:
    """Bytes that a process has in memory, and its part of those that it shares; 0 when it has ended."""
    try:
        lines = Path(f"/proc/{process}/smaps_rollup").read_text().splitlines()
        return next(int(line.split()[1]) * 1024 for line in lines if line.startswith("Pss:"))
    except (OSError, StopIteration):
        return 0


if __name__ == "__main__":
    given = sys.argv[1:]
    main(int(given[0]) if given else 4, int(given[1]) if len(given) > 1 else RESULTS, given[2:])
