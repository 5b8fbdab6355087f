"""The exact account of an export: rows = taken + left out, by reason, with the source lines, as an intake should find it."""

from typing import Any

import numpy as np

from synthetic_streams.analytes import STREAMS, stream_name
from synthetic_streams.mess import COMMENTS, Spoiled
from synthetic_streams.rows import TAKEN, Category

_REASONS = {
    Category.CONTROL: "control",
    Category.PROFICIENCY: "proficiency",
    Category.UNMAPPED_TEST: "unmapped_test",
    Category.RERUN: "rerun",
    Category.DUPLICATE: "exact_duplicate",
    Category.COMMENT: "comment",
    Category.OTHER_UNIT: "other_unit",
    Category.CUT_SHORT: "wrong_field_count",
}


def account(spoiled: Spoiled) -> dict[str, Any]:
    """Count every row of an export.

    Returns
    -------
    dict
        ``rows`` (blank lines apart), ``blank_lines``, ``taken``, ``taken_by_stream``, ``left_out`` by reason (they add up to
        ``rows``); among the taken ``censored_low``, ``censored_high``, ``other_spelling``; ``out_of_order``: lines of
        any kind earlier than a line above; ``source_lines``: line numbers (header = 1) of all left-out rows but
        controls.
    """
    rows = spoiled.rows
    category = rows.category
    taken = np.isin(category, TAKEN)
    out_of_order = rows.time < np.maximum.accumulate(rows.time)
    line = np.arange(len(rows)) + 2 + np.searchsorted(spoiled.blanks, np.arange(len(rows)), side="right")
    per_stream = np.bincount(rows.stream[taken], minlength=len(STREAMS)).tolist()
    comments = {text: int((rows.cells["result"] == text).sum()) for text in COMMENTS}
    return {
        "rows": len(rows),
        "blank_lines": len(spoiled.blanks),
        "taken": int(taken.sum()),
        "taken_by_stream": {stream_name(*stream): n for stream, n in zip(STREAMS, per_stream, strict=True)},
        "left_out": {reason: int((category == code).sum()) for code, reason in _REASONS.items()},
        "comments": comments,
        "censored_low": int((rows.censor[taken] < 0).sum()),
        "censored_high": int((rows.censor[taken] > 0).sum()),
        "other_spelling": int((category == Category.OTHER_SPELLING).sum()),
        "out_of_order": int(out_of_order.sum()),
        "source_lines": {
            reason: line[category == code].tolist() for code, reason in _REASONS.items() if code != Category.CONTROL
        },
    }
