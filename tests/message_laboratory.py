"""The invented laboratory as senders of HL7 messages: plans for its streams, messages by analyser, a watch that takes them, its store."""

import json
import re
import signal
import sqlite3
import subprocess
import sys
import threading
import time
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import hl7
import numpy as np

from pbm.io.plan_file import write_plan
from pbm.records.plan import Admit, ControlLimits, HistoryMark, Made, MonitorPlan, Plan, StreamPlan
from synthetic_streams import Laboratory
from synthetic_streams.analytes import STREAMS, stream_name
from synthetic_streams.clock import HOUR
from synthetic_streams.faults import Fault
from synthetic_streams.lab_file import lab_toml
from synthetic_streams.laboratory import StreamSample
from synthetic_streams.messages import messages

RUN = [sys.executable, "-c", "from pbm.commands.main import main; main()"]
WEIGHT = 0.05
MADE = Made(
    by="a test",
    at=datetime(2031, 3, 1, tzinfo=UTC),
    history=HistoryMark(
        first=datetime(2031, 1, 1, tzinfo=UTC), last=datetime(2031, 2, 1, tzinfo=UTC), rows=1, sha256="0"
    ),
    seed=1,
    lab_sha256="0",
)


@dataclass(frozen=True)
class Sent:
    """Messages of every analyser in order of sending, and their results as NDJSON lines, analyser after analyser."""

    by_analyser: dict[str, list[bytes]]
    ndjson: list[str]


def write_folder(folder: Path, samples: Sequence[StreamSample], feed: str = "") -> Path:
    """A folder whose plan has a monitor by EWMA for every stream of the samples, or for one; `feed` is `[feed]` of lab.toml."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "lab.toml").write_text(lab_toml() + (f"\n[feed]\n{feed}\n" if feed else ""), encoding="utf-8")
    streams = {stream_name(one.analyte, one.line): _stream_plan(one) for one in samples} or {"sodium@line-2": USUAL}
    write_plan(folder / "plan.toml", Plan(made=MADE, streams=streams))
    return folder


def _stream_plan(sample: StreamSample) -> StreamPlan:
    values = sample.value[: max(1, len(sample) // 3)]
    centre, spread = float(np.median(values)), float(np.ptp(np.quantile(values, [0.25, 0.75]))) / 1.349 or 1.0
    return _watched(sample.analyte.unit, centre, spread)


def _watched(unit: str, centre: float, spread: float) -> StreamPlan:
    half = 3.4 * spread * (WEIGHT / (2 - WEIGHT)) ** 0.5
    monitor = MonitorPlan(
        admit=Admit(low=centre - 3 * spread, high=centre + 3 * spread),
        statistic="ewma",
        weight=WEIGHT,
        centre=centre,
        limits=ControlLimits(low=centre - half, high=centre + half),
        budget_per_day=0.033,
        spread=spread,
    )
    return StreamPlan(unit=unit, verdict="useful", reason="for a test", results_per_day=100, monitors=(monitor,))


def laboratory(results: int) -> tuple[Laboratory, list[StreamSample]]:
    """At least so many results of all streams, in which sodium of line-2 goes wrong half-way."""
    days = max(1, round(results / 3700))
    made = Laboratory(days, volume=max(0.05, results / (3600 * days)), seed=5)
    onset = int(made.sample(*STREAMS[0]).time[0]) + days * 12 * HOUR
    return made, [
        made.sample(analyte, line, (Fault("sodium", "line-2", onset, "shift", 1.0, "TEa"),))
        for analyte, line in STREAMS
    ]


def sent(made: Laboratory, samples: Sequence[StreamSample]) -> Sent:
    """The messages, read by an independent parser too."""
    by_analyser: dict[str, list[bytes]] = {line: [] for line in dict.fromkeys(one.line for one in samples)}
    lines: dict[str, list[str]] = {line: [] for line in by_analyser}
    for message in messages(made.draws, samples):
        analyser, results = _read(message)
        by_analyser[analyser].append(message)
        lines[analyser] += results
    return Sent(by_analyser, [line for every in lines.values() for line in every])


def _read(message: bytes) -> tuple[str, list[str]]:
    """The analyser of a message, and its results as NDJSON."""
    parsed = hl7.parse(message.decode())
    specimen, ward = str(parsed.segment("SPM")[2]), str(parsed.segment("PV1")[3])
    found = []
    for obx in parsed.segments("OBX"):
        one = {
            "time": re.sub(r"(\d{4})(\d\d)(\d\d)(\d\d)(\d\d)(\d\d)", r"\1-\2-\3T\4:\5:\6", str(obx[19])),
            "analyte": str(obx[3][0][3]),
            "analyser": str(obx[18][0][0]),
            "value": str(obx[5]).replace("^", ""),
            "unit": str(obx[6]),
            "specimen": specimen,
            "ward": ward,
        }
        found.append(json.dumps(one) + "\n")
    return one["analyser"], found


USUAL = _watched("mmol/L", 140.0, 3.0)


class Watch:
    """A `pbm watch` of its own process.

    Parameters
    ----------
    folder
        The laboratory's.
    sources
        What it reads.
    json
        Whether alarms are printed as JSON.
    """

    def __init__(self, folder: Path, *sources: str, json: bool = False) -> None:
        given = [part for source in sources for part in ("--from", source)]
        self.process = subprocess.Popen(
            [*RUN, "watch", *given, "--lab", str(folder), *["--json"] * json],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        self._lines: list[str] = []
        self._hearing = threading.Thread(target=self._hear, daemon=True)
        self._hearing.start()

    def _hear(self) -> None:
        assert self.process.stderr is not None
        for line in self.process.stderr:
            self._lines.append(line)

    @property
    def told(self) -> str:
        """What it has said on stderr so far."""
        return "".join(self._lines)

    def port(self) -> int:
        """The port at which it receives messages, once it watches."""
        self.wait_for("No alarm does not prove")
        return int(self.wait_for(r"Listening at \S+:(\d+) for")[1])

    def wait_for(self, pattern: str, patience: float = 60.0) -> re.Match[str]:
        """Wait until it has said something on stderr."""
        until = time.monotonic() + patience
        while not (found := re.search(pattern, self.told)):
            if time.monotonic() > until or (self.process.poll() is not None and not self._hearing.is_alive()):
                raise AssertionError(f"the watch said no {pattern!r}, but: {self.told}")
            time.sleep(0.01)
        return found

    def kill(self) -> None:
        """End it as a power cut would."""
        self.process.kill()
        self._end()

    def stop(self) -> str:
        """End it as a person would; what it printed on stdout."""
        self.process.send_signal(signal.SIGTERM)
        printed = self._end()
        assert self.process.returncode == 0, self.told
        return printed

    def _end(self) -> str:
        assert self.process.stdout is not None and self.process.stderr is not None
        printed = "" if self.process.stdout.closed else self.process.stdout.read()
        self.process.wait(60)
        self._hearing.join(10)
        self.process.stdout.close()
        self.process.stderr.close()
        return printed


def kept(folder: Path) -> dict[str, list[tuple[Any, ...]]]:
    """What a store holds of each stream: results in order, alarms, states; whatever the order in which streams were met."""
    with sqlite3.connect(folder / "watch.sqlite") as connection:
        asked = {
            "results": "select analyte, analyser, specimen, time, value, censor, ward, left_out from results join streams on "
            "streams.id = stream order by analyte, analyser, seq",
            "alarms": "select analyte, analyser, monitor, alarms.time, specimen, side, value, control_limit, onset, onset_low, onset_high, "
            "results, size, expected_unreliable from alarms join streams on streams.id = stream order by analyte, analyser, alarms.id",
            "states": "select analyte, analyser, monitor, settings, state, taken, admitted, value, episode from monitors join streams on "
            "streams.id = stream order by analyte, analyser, monitor",
        }
        return {name: connection.execute(question).fetchall() for name, question in asked.items()}


def replayed(folder: Path, ndjson: Iterable[str]) -> None:
    """The same results through standard input, in one undisturbed run."""
    subprocess.run(
        [*RUN, "watch", "--from", "-", "--lab", str(folder)],
        input="".join(ndjson),
        capture_output=True,
        text=True,
        check=True,
    )
