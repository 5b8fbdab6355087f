"""How often silence is told although all is well: rhythms learned on two thirds of a history, notices counted on the last third.

python -m tests.benchmarks.silence_rate FOLDER      of a laboratory with history/, such as the one that `pbm demo` makes
"""

import sys
from collections import defaultdict
from pathlib import Path

import numpy as np

from pbm.io.history import read_history, stream_sizes
from pbm.io.lab_file import read_lab
from pbm.methods.clock_time import MICROSECONDS_PER_DAY
from pbm.methods.intervals import poisson_interval
from pbm.methods.jit import Integers
from pbm.methods.silence import expected_in_gaps
from pbm.methods.split import TRAINING_SHARE
from pbm.stages.rhythm import learn_rhythm, merged


def main(folder: Path) -> None:
    """Print, for streams and analysers, the notices seen and expected."""
    lab, places = read_lab(folder / "lab.toml"), defaultdict[str, list[Integers]](list)
    for name in stream_sizes(folder / "history"):
        time = read_history(folder / "history", name).time
        places[str(name)].append(time)
        places[name.analyser].append(time)
    seen, expected = 0, 0.0
    for place, times in sorted(places.items()):
        time = merged(times)
        cut = time[0] + (time[-1] - time[0]) * TRAINING_SHARE
        early, late = time[time < cut], time[time >= cut]
        rhythm = learn_rhythm(early, lab.laboratory.zone, lab.quiet.budget.per_day)
        if rhythm is None:
            sys.stdout.write(f"{place}: too few results to learn a rhythm\n")
            continue
        found = int((expected_in_gaps(late, np.array(rhythm.by_hour), lab.laboratory.zone) > rhythm.quiet_at).sum())
        seen, days = seen + found, float(late[-1] - late[0]) / MICROSECONDS_PER_DAY
        expected += rhythm.false_per_day * days
        sys.stdout.write(
            f"{place}: quiet at {rhythm.quiet_at:g} results; {found} notices in {days:.0f} held-out days\n"
        )
    low, high = poisson_interval(seen, 0.9)
    sys.stdout.write(f"all: {seen} notices, 90 % interval {low:.1f} to {high:.1f}; {expected:.1f} expected\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]))
