"""Tables of expected unreliable results: for each onset, what is reported and what is final, by the result with which the alarm comes."""

import numpy as np

from pbm.methods.expected import Exposure
from pbm.methods.jit import Floats


def reported(found: Exposure) -> Floats:
    """N_u if reporting stops after 0 ... h affected results, shape (r, h + 1); beyond its horizon an onset stays as it was there."""
    return np.column_stack([found.unreliable(stop) for stop in _stops(found)])


def final(found: Exposure) -> Floats:
    """N_uf if the alarm comes with affected result 0 ... h, shape (r, h + 1)."""
    return np.column_stack([found.unreliable_final(stop) for stop in _stops(found)])


def _stops(found: Exposure) -> list[np.ndarray[tuple[int], np.dtype[np.int64]]]:
    length = found.onsets.length
    return [np.minimum(length, stop) for stop in range(int(length.max()) + 1)]
