"""Faults put into a fresh invented stream at known onsets, and `pbm watch` over each: when it alarms, and what had gone out by then.

Every onset is a stream of its own for the watch: results before it, as they are, then the results under the fault. What was unreliable
is known result by result, since the invented laboratory knows each patient's own value: an error beyond TEa that there would not be
without the fault.
"""

import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from typer.testing import CliRunner

from pbm.commands.main import app
from pbm.io.plan_file import read_plan, write_plan
from pbm.methods.jit import Floats, Integers
from pbm.records.plan import StreamPlan
from synthetic_streams import Laboratory
from synthetic_streams.analytes import STREAMS
from synthetic_streams.export import clean_lines, write_lines
from synthetic_streams.faults import Fault, error
from synthetic_streams.laboratory import StreamSample
from synthetic_streams.reporting import report
from synthetic_streams.rows import patient_rows

DAY = 86_400_000_000
HORIZON_DAYS, LAG = 7, 10
FIRST_LOOK = 200  # affected results read at first; where there is no alarm among them, all to the horizon


@dataclass(frozen=True)
class Replay:
    """A fresh stream, the fault put into it, and the folder of the laboratory whose plan watches it."""

    folder: Path
    fresh: Laboratory
    sample: StreamSample
    fault: Fault

    def onsets(self, count: int, warm_up: int, random: np.random.Generator) -> Integers:
        """Onsets with the whole horizon after them; every result is as likely to be the first affected one."""
        time = self.sample.time
        last = int(np.searchsorted(time, time[-1] - HORIZON_DAYS * DAY))
        return np.sort(random.integers(warm_up, last, count))

    def results_to_alarm(self, onsets: Integers, warm_up: int) -> Integers:
        """Affected results until the alarm at each onset; 0 where there is none within the horizon."""
        end = self.horizon(onsets)
        found = self._watched(onsets, onsets - warm_up, np.minimum(onsets + FIRST_LOOK, end), "first")
        again = np.flatnonzero((found == 0) & (end - onsets > FIRST_LOOK))
        if len(again):
            found[again] = self._watched(onsets[again], onsets[again] - warm_up, end[again], "again")
        return found

    def horizon(self, onsets: Integers) -> Integers:
        """Index after the last result followed."""
        time = self.sample.time
        return np.searchsorted(time, time[onsets] + HORIZON_DAYS * DAY, side="right")

    def unreliable(self, onsets: Integers, to_alarm: Integers) -> Integers:
        """Results beyond TEa, up to the alarm and the response lag, less those that would be so without the fault."""
        length = self.horizon(onsets) - onsets
        stop = np.where(to_alarm > 0, np.minimum(to_alarm + LAG, length), length)
        wrong = self._beyond(self._under_fault(np.arange(len(self.sample)))) - self._beyond(self.sample.value_without)
        so_far = np.concatenate([[0], np.cumsum(wrong)])
        return so_far[onsets + stop] - so_far[onsets]

    def _under_fault(self, which: Integers) -> Floats:
        return report(self.sample.analyte, self._raw(which)).value

    def _raw(self, which: Integers) -> Floats:
        raw, nobody = self.sample.raw[which], np.zeros(len(which), dtype=np.int64)
        return raw + error(self.fault, self.sample.analyte, raw, nobody, nobody, np.random.default_rng(0))

    def _beyond(self, value: Floats) -> Integers:
        true = self.sample.true_value
        return (np.abs(value - true) > self.sample.analyte.tea(true)).astype(np.int64)

    def _watched(self, onsets: Integers, first: Integers, last: Integers, name: str) -> Integers:
        """Run the watch over the results first ... last - 1 of each onset."""
        rows = np.concatenate([np.arange(a, b) for a, b in zip(first.tolist(), last.tolist(), strict=True)])
        whose = np.repeat(np.arange(len(onsets)), last - first)
        affected = rows >= onsets[whose]
        text = np.where(affected, report(self.sample.analyte, self._raw(rows)).text, self.sample.text[rows])
        stream = next(i for i, (a, line) in enumerate(STREAMS) if (a, line) == (self.sample.analyte, self.sample.line))
        made = patient_rows(self.fresh.draws, self.sample.rows(rows), stream)
        made.cells["result"] = text
        made.cells["line"] = np.array([f"{self.sample.line}-{one}" for one in range(len(onsets))], dtype=object)[whose]
        order = np.argsort(made.time, kind="stable")
        feed = self.folder / f"{name}.csv"
        write_lines(feed, clean_lines(made.take(order), self.fresh.hours))
        count = np.zeros(len(onsets), dtype=np.int64)
        specimen = self.sample.specimen
        for line, found in _alarms(self.folder, feed, self._plan(len(onsets))):
            one = int(line.rpartition("-")[2])
            place = int(np.flatnonzero(specimen[first[one] : last[one]] == found)[0]) + int(first[one])
            if place >= onsets[one] and count[one] == 0:
                count[one] = place - onsets[one] + 1
        return count

    def _plan(self, onsets: int) -> dict[str, StreamPlan]:
        name = f"{self.sample.analyte.key}@{self.sample.line}"
        stream = read_plan(self.folder / "tuned.toml").streams[name]
        return {f"{name}-{one}": stream for one in range(onsets)}


def _alarms(folder: Path, feed: Path, streams: dict[str, StreamPlan]) -> list[tuple[str, str]]:
    """Every alarm of the watch: whose it is, and the specimen that raised it."""
    plan = read_plan(folder / "tuned.toml")
    write_plan(folder / "plan.toml", plan.model_copy(update={"streams": streams, "analysers": {}}))
    for old in folder.glob("watch.*"):
        old.unlink()
    found = CliRunner().invoke(app, ["watch", "--from", str(feed), "--once", "--json", "--lab", str(folder)])
    assert found.exit_code == 0, f"{found.output}\n{found.exception!r}"
    told = [json.loads(line) for line in found.stdout.splitlines() if line.startswith("{")]
    feed.unlink()
    return [(one["stream"], one["specimen"]) for one in told if "specimen" in one]
