"""The laboratory's folder: history as an export, controls, `lab.toml`, two live days with a fault, and the truth about all of it."""

import json
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from datetime import timedelta
from pathlib import Path
from typing import Any

import numpy as np

from synthetic_streams.account import account
from synthetic_streams.analytes import STREAMS, stream_name
from synthetic_streams.clock import HOUR, midnight, utc_text
from synthetic_streams.controls import ControlResults, measure_controls
from synthetic_streams.events import event_lines
from synthetic_streams.export import clean_lines, control_lines, export_lines, ndjson_lines, write_lines
from synthetic_streams.faults import Fault
from synthetic_streams.lab_file import lab_toml
from synthetic_streams.laboratory import FIRST_DAY, NAME, Laboratory, StreamSample
from synthetic_streams.mess import Spoiled, spoil
from synthetic_streams.messages import messages
from synthetic_streams.rows import control_rows, join, patient_rows

LIVE_DAYS = 2


@dataclass(frozen=True, slots=True)
class Summary:
    """What was written.

    Attributes
    ----------
    folder
        Where.
    rows, bytes
        Rows and size of `extract/export.csv`.
    taken
        Rows of it that are patient results an intake should take.
    live
        Results in the live files.
    messages
        HL7 messages.
    """

    folder: Path
    rows: int
    bytes: int
    taken: int
    live: int
    messages: int


def live_start(days: int) -> int:
    """UTC microseconds at which the live days begin."""
    return midnight(FIRST_DAY + timedelta(days))


def default_faults(days: int) -> tuple[Fault, ...]:
    """One fault: sodium on line-2 reads 0.75 TEa high from 10:00 of the second live day."""
    return (Fault("sodium", "line-2", live_start(days) + 34 * HOUR, "shift", 0.75, "TEa"),)


def write_laboratory(
    folder: Path | str,
    days: int = 120,
    volume: float = 1.0,
    seed: int = 1,
    faults: Sequence[Fault] | None = None,
) -> Summary:
    """Write the invented laboratory.

    Parameters
    ----------
    folder
        Made if it does not exist; files in it are overwritten.
    days
        Days of history; two live days follow.
    volume
        Factor on the number of specimens.
    seed
        Master seed: the same seed gives the same bytes.
    faults
        Faults of the live days; `default_faults` if not given.

    Raises
    ------
    ValueError
        If a size is impossible, or a fault begins within the history.
    """
    if days < 1:
        raise ValueError(f"expected at least one day of history, found {days}")
    chosen = tuple(default_faults(days) if faults is None else faults)
    start = live_start(days)
    if any(fault.onset < start for fault in chosen):
        raise ValueError("a fault may begin only after the history, at or after " + _iso(start))
    laboratory = Laboratory(days + LIVE_DAYS, volume, seed)
    samples = [laboratory.sample(analyte, line, chosen) for analyte, line in STREAMS]
    controls = [measure_controls(laboratory, sample, chosen) for sample in samples]
    target = Path(folder)
    write_lines(target / "lab.toml", [lab_toml()])
    spoiled, size = _write_history(target, laboratory, samples, controls, days)
    live = [sample.rows(sample.time >= start) for sample in samples]
    live_controls = [c.rows(c.time >= start) for c in controls]
    sent = _write_live(target, laboratory, live, live_controls)
    steps = [laboratory.levels(analyte, line).since(start) for analyte, line in STREAMS]
    write_lines(target / "live-events.csv", event_lines(steps, live_controls, laboratory.hours))
    write_json(target / "faults.json", {"faults": [fault_truth(fault, live) for fault in chosen]})
    counted = account(spoiled)
    write_json(target / "truth.json", _setting(laboratory, days) | {"export": counted, "levels": _levels(laboratory)})
    results = sum(len(sample) for sample in live)
    return Summary(target, counted["rows"], size, counted["taken"], results, sent)


def write_json(path: Path, content: dict[str, Any]) -> None:
    """Write JSON for people and programs."""
    path.write_text(json.dumps(content, indent=1) + "\n", encoding="utf-8")


def fault_truth(fault: Fault, samples: Sequence[StreamSample]) -> dict[str, Any]:
    """A fault and the true error of every result that it concerns: what the faults added to the raw value.

    Parameters
    ----------
    fault
        The fault.
    samples
        Results of all streams; where several faults meet in a stream the errors are their sum.
    """
    sample = next(s for s in samples if (s.analyte.key, s.line) == (fault.analyte, fault.line))
    after = sample.rows(sample.time >= fault.onset)
    columns = (utc_text(after.time), after.specimen, after.text, after.text_without, after.error.tolist())
    names = ("time", "specimen", "reported", "without", "error")
    results = [dict(zip(names, row, strict=True)) for row in zip(*columns, strict=True)]
    described = asdict(fault) | {"stream": stream_name(sample.analyte, sample.line), "onset": _iso(fault.onset)}
    return described | {"onset_us": fault.onset, "results": results}


def _iso(time: int) -> str:
    return utc_text(np.array([time]))[0]


def _write_history(
    folder: Path, laboratory: Laboratory, samples: list[StreamSample], controls: list[ControlResults], days: int
) -> tuple[Spoiled, int]:
    """The export and the controls of the history; returns the rows and the size of the export in bytes."""
    end = live_start(days)
    past = [results.rows(results.time < end) for results in controls]
    parts = [
        patient_rows(laboratory.draws, sample.rows(sample.time < end), stream) for stream, sample in enumerate(samples)
    ]
    parts += [
        control_rows(results, analyte, line, stream)
        for stream, ((analyte, line), results) in enumerate(zip(STREAMS, past, strict=True))
    ]
    spoiled = spoil(laboratory, join(parts), days)
    size = write_lines(folder / "extract" / "export.csv", export_lines(spoiled, laboratory.hours))
    write_lines(folder / "controls.csv", control_lines(past, laboratory.hours))
    return spoiled, size


def _write_live(folder: Path, laboratory: Laboratory, live: list[StreamSample], controls: list[ControlResults]) -> int:
    """The live days as CSV, NDJSON and HL7, and their controls; returns the number of messages."""
    rows = join([patient_rows(laboratory.draws, sample, stream) for stream, sample in enumerate(live)])
    rows = rows.take(np.argsort(rows.time, kind="stable"))
    write_lines(folder / "live.csv", clean_lines(rows, laboratory.hours))
    write_lines(folder / "live.ndjson", ndjson_lines(rows))
    write_lines(folder / "live-controls.csv", control_lines(controls, laboratory.hours))
    sent = messages(laboratory.draws, live)
    (folder / "messages.hl7").write_bytes(b"".join(sent))
    return len(sent)


def _setting(laboratory: Laboratory, days: int) -> dict[str, Any]:
    return {
        "laboratory": NAME,
        "seed": laboratory.seed,
        "volume": laboratory.volume,
        "first_day": laboratory.first_day.isoformat(),
        "history_days": days,
        "live_days": LIVE_DAYS,
        "live_start": _iso(live_start(days)),
    }


def _levels(laboratory: Laboratory) -> dict[str, list[dict[str, Any]]]:
    """Calibrations and reagent lots of every stream; levels in units of the analytic SD."""
    told = {}
    for analyte, line in STREAMS:
        steps = laboratory.levels(analyte, line)
        columns = zip(utc_text(steps.time), steps.new_lot.tolist(), steps.level.tolist(), strict=True)
        told[stream_name(analyte, line)] = [{"time": t, "new_lot": lot, "level": level} for t, lot, level in columns]
    return told
