"""How long `pbm appraise` takes for 40 streams of 100 days, and how much memory its processes hold. Run by hand: it prints figures.

python -m tests.benchmarks.appraise_many [STREAMS [DAYS]]

The wanted figures: under 3 minutes on 2 processors, under 1.5 GB.
"""

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from pbm.io.plan_file import read_plan, write_plan
from synthetic_streams import Laboratory
from synthetic_streams.analytes import STREAMS
from synthetic_streams.export import clean_lines, write_lines
from synthetic_streams.lab_file import lab_toml
from synthetic_streams.rows import join, patient_rows

PBM = (sys.executable, "-c", "from pbm.commands.main import main; main()")
TWIN = "-twin"  # analysers of a second invented laboratory, which makes up the number


def main(streams: int, days: int) -> None:
    """Make the laboratory, tune it, and time the appraisal."""
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        names = _write(folder, streams, days)
        _run("intake", str(folder / "export.csv"), "--lab", str(folder))
        _run("tune", *(name for name in names if TWIN not in name), "--quick", "--lab", str(folder))
        _plan_for_all(folder, names)
        begun, used = time.perf_counter(), _processor_seconds()
        memory = _most_memory([*PBM, "appraise", "--workers", "2", "--lab", str(folder)])
        elapsed, processor = time.perf_counter() - begun, _processor_seconds() - used
        size = (folder / "reports" / "appraisal.html").stat().st_size / 1e6
        sys.stdout.write(
            f"{len(names)} streams of {days} days: {elapsed:.0f} s, {processor:.0f} s of a processor, {memory / 1e9:.2f} GB at most; "
            f"report {size:.1f} MB\n"
        )


def _write(folder: Path, streams: int, days: int) -> list[str]:
    """An extract of so many streams, and their names."""
    write_lines(folder / "lab.toml", [lab_toml()])
    names, parts, left = [], [], streams
    for twin, seed in (("", 1), (TWIN, 2)):
        laboratory = Laboratory(days, seed=seed)
        for place, (analyte, line) in list(enumerate(STREAMS))[: max(left, 0)]:
            rows = patient_rows(laboratory.draws, laboratory.sample(analyte, line), place)
            rows.cells["line"] = rows.cells["line"] + twin
            parts.append(rows)
            names.append(f"{analyte.key}@{line}{twin}")
        left -= len(STREAMS)
    every = join(parts)
    write_lines(folder / "export.csv", clean_lines(every.take(np.argsort(every.time, kind="stable")), laboratory.hours))
    return names


def _plan_for_all(folder: Path, names: list[str]) -> None:
    """Twins are watched as the streams of which they are twins."""
    plan = read_plan(folder / "plan.toml")
    streams = {name: plan.streams[name.removesuffix(TWIN)] for name in names}
    write_plan(folder / "plan.toml", plan.model_copy(update={"streams": streams}))


def _run(*arguments: str) -> None:
    subprocess.run([*PBM, *arguments], capture_output=True, check=True)


def _most_memory(command: list[str]) -> int:
    """Run a command; the most memory that it and its children held together, in bytes, looked at twice a second."""
    most = 0
    with subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL) as running:
        while running.poll() is None:
            most = max(most, sum(map(_held, _family(running.pid))))
            time.sleep(0.5)
    if running.returncode:
        raise SystemExit(f"the appraisal left with {running.returncode}")
    return most


def _family(parent: int) -> list[int]:
    """A process and all that it began."""
    parents = {}
    for status in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = status.read_text().rpartition(")")[2].split()
        except OSError:
            continue
        parents[int(status.parent.name)] = int(fields[1])
    found = [parent]
    for one in found:
        found.extend(child for child, of in parents.items() if of == one)
    return found


def _held(process: int) -> int:
    """Memory that is its own, or its share of what is shared."""
    try:
        lines = Path(f"/proc/{process}/smaps_rollup").read_text().splitlines()
    except OSError:
        return 0
    return sum(int(line.split()[1]) * 1024 for line in lines if line.startswith("Pss:"))


def _processor_seconds() -> float:
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


if __name__ == "__main__":
    main(*(int(one) for one in sys.argv[1:] or ("40", "100")))
