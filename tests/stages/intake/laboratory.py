"""A small laboratory and blocks of text for the tests of intake."""

from typing import Any

import numpy as np
import pyarrow as pa

from pbm.records.intake import LEFT_OUT_SCHEMA, ParsedBlock, TextBlock
from pbm.records.laboratory import Lab
from pbm.stages.intake import RowReader

KEY = b"key of the tests"
LAB: dict[str, Any] = {
    "laboratory": {"name": "Tern Bay District Laboratory", "timezone": "Atlantic/Azores"},
    "extract": {
        "time": "reported_at",
        "analyte": "test",
        "value": "result",
        "analyser": "line",
        "unit": "unit",
        "specimen": "specimen",
        "ward": "location",
        "sex": "sex",
        "age": "age",
        "lot": "reagent_lot",
        "patient": "patient",
        "kind": "kind",
    },
    "analytes": {
        "sodium": {
            "unit": "mmol/L",
            "step": 1,
            "allowable_error": {"absolute": 4.0},
            "analytic_sd": {"absolute": 0.9},
            "names": ("NA", "Na"),
            "plausible": {"low": 80, "high": 220},
        },
        "glucose": {
            "unit": "mmol/L",
            "step": 0.1,
            "allowable_error": {"percent": 8},
            "analytic_sd": {"cv_percent": 2},
            "names": ("GLU",),
            "unit_names": ("mmol/l",),
            "leave_out_wards": ("DIAL",),
            "repeat_hours": 12,
        },
    },
}
ROW = {
    "time": "2031-03-02T07:14:05Z",
    "analyte": "NA",
    "value": "138",
    "analyser": "line-2",
    "unit": "mmol/L",
    "specimen": "S-1",
    "ward": "ED",
    "sex": "F",
    "age": "61",
    "patient": "P-1",
    "kind": "P",
}


def lab(**changed: Any) -> Lab:
    """The laboratory, with tables replaced."""
    return Lab.model_validate({**LAB, **changed})


def block(*rows: dict[str, str], without: tuple[str, ...] = (), encoded: bool = False, **options: Any) -> TextBlock:
    """A block of rows that differ from `ROW` where said; line 2 is the first."""
    columns = {
        role: pa.array([{**ROW, **row}[role] for row in rows], pa.string()) for role in ROW if role not in without
    }
    if encoded:
        columns = {role: column if role == "time" else column.dictionary_encode() for role, column in columns.items()}
    return TextBlock("export.csv", np.arange(2, 2 + len(rows)), columns, LEFT_OUT_SCHEMA.empty_table(), **options)


def parse(*rows: dict[str, str], **options: Any) -> ParsedBlock:
    """What intake makes of such rows."""
    return RowReader(options.pop("lab", None) or lab(), KEY).parse(block(*rows, **options))


def left(parsed: ParsedBlock) -> list[tuple[int, str, str, str]]:
    """Line, reason, what was found and stream of the rows left out, by line."""
    rows = parsed.left_out.to_pylist()
    return sorted((row["line"], row["reason"], row["found"], row["stream"]) for row in rows)
