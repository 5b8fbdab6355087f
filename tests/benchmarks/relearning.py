"""What learning the centre again costs and saves: false alarms without and with calibrations that change nothing, and with lots that do.

python -m tests.benchmarks.relearning [RESULTS]
"""

import sys

import numpy as np

from pbm.records.event import EventKind
from pbm.stages.monitor import StreamMonitor
from tests.live_laboratory import MINUTE, SODIUM, START, ewma, laboratory, results

EVERY = 1_400  # results between two events: about four days of a busy stream


def main(count: int) -> None:
    """Print alarms for each 10,000 results of sodium: TEa 4 mmol/L, SD of results 3, EWMA 0.1, lots with an SD of 0.1 TEa."""
    random = np.random.default_rng(1)
    plain = np.round(random.normal(140, 3, count))
    lots = np.repeat(random.normal(0, 0.4, count // EVERY + 1), EVERY)[:count]
    moved = np.round(random.normal(140 + lots, 3))
    for what, values, kind in (
        ("nothing happens", plain, None),
        ("calibrations that change nothing", plain, "calibration"),
        ("lots, not told", moved, None),
        ("lots, told", moved, "reagent lot"),
    ):
        alarms = _alarms(values, kind)
        sys.stdout.write(f"{what}: {alarms / count * 10_000:.2f} alarms in 10,000 results ({alarms})\n")


def _alarms(values: np.ndarray[tuple[int], np.dtype[np.float64]], kind: EventKind | None) -> int:
    monitor = StreamMonitor(SODIUM, 0, ewma(half_width=2.45), laboratory())
    for place in range(0, len(values), EVERY) if kind else ():
        monitor.note(START + place * MINUTE, kind)
    monitor._estimate = lambda: None  # type: ignore[method-assign]  # the onset of each false alarm costs time and is not asked for
    return sum(monitor.take(result) is not None for result in results(values))


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000)
