"""Laboratory events of the live days, as a laboratory would write them down: calibrations, reagent lots, controls with their outcome."""

from collections.abc import Sequence

import numpy as np

from synthetic_streams.analysers import Levels
from synthetic_streams.analytes import STREAMS
from synthetic_streams.clock import Hours, local_text
from synthetic_streams.controls import ControlResults

EVENTS_HEADER = "time,event,analyte,analyser,detail"


def event_lines(levels: Sequence[Levels], controls: Sequence[ControlResults], hours: Hours) -> list[str]:
    """Events in order of time, with a header.

    Parameters
    ----------
    levels, controls
        Calibrations, lots and control results of the time wanted; one list element a stream of `STREAMS`.
    hours
        Of the laboratory's clocks.
    """
    found: list[tuple[int, str]] = []
    for (analyte, line), steps, results in zip(STREAMS, levels, controls, strict=True):
        found += _of(analyte.key, line, steps, results)
    found.sort()
    texts = local_text(hours, np.array([time for time, _ in found], dtype=np.int64))
    return [EVENTS_HEADER, *(f"{at},{rest}" for at, (_, rest) in zip(texts, found, strict=True))]


def _of(analyte: str, line: str, levels: Levels, controls: ControlResults) -> list[tuple[int, str]]:
    """Time and the rest of the line of each event of a stream."""
    steps = zip(levels.time.tolist(), levels.new_lot.tolist(), strict=True)
    told = [(time, f"{'reagent lot' if lot else 'calibration'},{analyte},{line},") for time, lot in steps]
    # An event is known when its last level is: they are measured one after the other.
    last = np.flatnonzero(np.diff(controls.level, append=0) <= 0)
    outcomes = zip(controls.time[last].tolist(), controls.accepted[last].tolist(), strict=True)
    return told + [(time, f"control {'accepted' if ok else 'rejected'},{analyte},{line},") for time, ok in outcomes]
