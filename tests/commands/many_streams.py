"""A history of small invented streams, and tasks on a stream that answer, fail, die or wait; workers load them from here."""

import os
import signal
import time
from pathlib import Path

import numpy as np
import pyarrow as pa

from pbm.io.history_writer import HistoryWriter
from pbm.records.intake import LEFT_OUT_SCHEMA, RESULT_SCHEMA, ParsedBlock, Sifted
from pbm.records.stream import StreamHistory, StreamName

FIRST = 1_925_000_000_000_000  # microseconds, in 2031


def write_history(folder: Path, sizes: dict[str, int], days: int = 30) -> list[StreamName]:
    """Write independent normal results about 139 as `folder`/history; the names of the streams, the longest first."""
    with HistoryWriter(folder / "history") as writer:
        for number, (name, size) in enumerate(sizes.items()):
            writer.add(_block(StreamName.parse(name), size, days, np.random.default_rng(number)))
        for _ in writer.merge(lambda _, results: Sifted(results, LEFT_OUT_SCHEMA.empty_table())):
            pass
        writer.put_in_place([])
    return sorted(map(StreamName.parse, sizes), key=lambda name: (-sizes[str(name)], name))


def _block(name: StreamName, size: int, days: int, random: np.random.Generator) -> ParsedBlock:
    columns = {
        "time": np.sort(random.integers(FIRST, FIRST + days * 86_400_000_000, size)),
        "value": np.rint(random.normal(139, 3.8, size)),
        "censor": np.zeros(size, np.int8),
        "line": np.arange(size),
    }
    texts = pa.array([""] * size)
    arrays = [
        pa.array(columns[field.name]).cast(field.type) if field.name in columns else texts for field in RESULT_SCHEMA
    ]
    return ParsedBlock(pa.table(arrays, schema=RESULT_SCHEMA), ((name, size),), LEFT_OUT_SCHEMA.empty_table())


def total(history: StreamHistory) -> float:
    """The sum of a stream's results."""
    return float(history.value.sum())


def fails_on_chloride(history: StreamHistory) -> float:
    """The sum, but a defect where the analyte is chloride."""
    if history.name.analyte == "chloride":
        raise ZeroDivisionError("chloride was divided by nothing")
    return total(history)


def dies_on_chloride(history: StreamHistory) -> float:
    """The sum, but the process ends, as by the system when memory has run out, where the analyte is chloride."""
    if history.name.analyte == "chloride":
        os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(0.05)
    return total(history)


class DiesOnce:
    """The sum; the first process that works on chloride ends before it has it."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def __call__(self, history: StreamHistory) -> float:
        """See the class."""
        mark = self.folder / "died"
        if history.name.analyte == "chloride" and not mark.exists():
            mark.touch()
            os.kill(os.getpid(), signal.SIGKILL)
        return total(history)


class Counted:
    """The sum; leaves a file for each time a stream is worked on."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def __call__(self, history: StreamHistory) -> float:
        """See the class."""
        (self.folder / f"{history.name}.{time.monotonic_ns()}").touch()
        return total(history)


class InterruptedOn:
    """The sum, but Ctrl-C is pressed at one stream."""

    def __init__(self, name: str) -> None:
        self.name = name

    def __call__(self, history: StreamHistory) -> float:
        """See the class."""
        if str(history.name) == self.name:
            raise KeyboardInterrupt
        return total(history)


class Waits:
    """Says which process works on a stream, and works on it for ever."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def __call__(self, history: StreamHistory) -> float:
        """See the class."""
        (self.folder / str(os.getpid())).touch()
        while True:
            time.sleep(1)
