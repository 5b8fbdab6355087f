"""From a raw value to what is reported: rounding to the step, then the measuring range with '<' and '>'."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from synthetic_streams.analytes import Analyte

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Reported:
    """Reported results, one element each: number (the limit, if beyond it), censor (-1 "<", +1 ">", 0) and text."""

    value: Floats
    censor: npt.NDArray[np.int8]
    text: npt.NDArray[np.object_]


def report(analyte: Analyte, raw: Floats) -> Reported:
    """Round to the reported step, then censor at the measuring range."""
    scale = 10**analyte.decimals
    steps = np.rint(raw * scale).astype(np.int64)
    low, high = round(analyte.low * scale), round(analyte.high * scale)
    bounded = np.clip(steps, low - 1, high + 1)
    distinct, place = np.unique(bounded, return_inverse=True)
    texts = np.array([_text(int(step), low, high, analyte.decimals) for step in distinct], dtype=object)
    censor = (steps > high).astype(np.int8) - (steps < low).astype(np.int8)
    return Reported(np.clip(steps, low, high) / scale, censor.astype(np.int8), texts[place])


def _text(step: int, low: int, high: int, decimals: int) -> str:
    sign = "<" if step < low else ">" if step > high else ""
    return f"{sign}{min(max(step, low), high) / 10**decimals:.{decimals}f}"
