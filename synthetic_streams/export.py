"""Files of rows: the history as a laboratory's export (CSV), controls, and the live feed as CSV and as NDJSON."""

import json
from pathlib import Path

import numpy as np

from synthetic_streams.analytes import STREAMS
from synthetic_streams.clock import Hours, local_text, utc_text
from synthetic_streams.controls import ControlResults
from synthetic_streams.mess import Spoiled
from synthetic_streams.rows import HEADER, Category, Rows

CONTROLS_HEADER = "time,analyte,line,level,value,verdict"
FIELDS_OF_CUT_ROW = 6


def write_lines(path: Path, lines: list[str]) -> int:
    """Write text lines; returns the number of bytes."""
    content = ("\n".join(lines) + "\n").encode()
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(content)
    return len(content)


def export_lines(spoiled: Spoiled, hours: Hours) -> list[str]:
    """The export with its header, blank lines and cut rows."""
    lines = spoiled.rows.lines(hours)
    for row in np.flatnonzero(spoiled.rows.category == Category.CUT_SHORT).tolist():
        lines[row] = ",".join(lines[row].split(",")[:FIELDS_OF_CUT_ROW])
    for row in reversed(spoiled.blanks.tolist()):
        lines.insert(row, "")
    return [HEADER, *lines]


def clean_lines(rows: Rows, hours: Hours) -> list[str]:
    """Rows in the order given, with the header."""
    return [HEADER, *rows.lines(hours)]


def ndjson_lines(rows: Rows) -> list[str]:
    """One JSON object a row: time in UTC, the analyte's key, the value as printed."""
    keys = [analyte.key for analyte, _ in STREAMS]
    names = ("line", "result", "unit", "specimen", "location", "sex", "age")
    columns = [rows.cells[name].tolist() for name in names]
    lines = []
    for time, stream, line, value, unit, *who in zip(utc_text(rows.time), rows.stream.tolist(), *columns, strict=True):
        given = {"time": time, "analyte": keys[stream], "analyser": line, "value": value, "unit": unit}
        given |= dict(zip(("specimen", "ward", "sex", "age"), who, strict=True))
        lines.append(json.dumps(given, separators=(",", ":")))
    return lines


def control_lines(controls: list[ControlResults], hours: Hours) -> list[str]:
    """Control results of all streams in order of time, with a header; one list element a stream of `STREAMS`."""
    time = np.concatenate([c.time for c in controls])
    order = np.argsort(time, kind="stable")
    tails = [
        f"{analyte.key},{line},{level},{text},{'accepted' if ok else 'rejected'}"
        for (analyte, line), c in zip(STREAMS, controls, strict=True)
        for level, text, ok in zip(c.level.tolist(), c.text.tolist(), c.accepted.tolist(), strict=True)
    ]
    texts = local_text(hours, time[order])
    return [CONTROLS_HEADER, *(f"{at},{tails[row]}" for at, row in zip(texts, order.tolist(), strict=True))]
