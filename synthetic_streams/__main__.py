"""Command line: `python -m synthetic_streams FOLDER --days 120 --volume 1 --seed 1 --fault sodium@line-2,shift,-1TEa,34`."""

import argparse
import re
import sys
from dataclasses import replace

from synthetic_streams.clock import HOUR
from synthetic_streams.faults import Fault
from synthetic_streams.write import live_start, write_laboratory

_SIZE = re.compile(r"^([+-]?\d+(?:\.\d+)?)(TEa|SD|unit|percent)$")


def fault_of(text: str, days: int) -> Fault:
    """Read a fault: STREAM,KIND,SIZE,HOURS, for example ``sodium@line-2,shift,-1TEa,34``.

    Parameters
    ----------
    text
        Stream, kind, size with its unit (for noise the factor on the analytic SD), hours after the live days began;
        for drift and sporadic one word more: results until the full size, or share of results.
    days
        Days of history.

    Raises
    ------
    ValueError
        If a word cannot be read.
    """
    words = text.split(",")
    size = _SIZE.match(words[2]) if 4 <= len(words) <= 5 else None
    if size is None:
        raise ValueError(f"expected STREAM,KIND,SIZE,HOURS such as sodium@line-2,shift,-1TEa,34, found {text}")
    analyte, _, line = words[0].partition("@")
    kind, hours, more = words[1], words[3], words[4:]
    onset = live_start(days) + round(float(hours) * HOUR)
    fault = Fault(analyte, line, onset, kind, float(size[1]), size[2])
    if more and kind == "drift":
        return replace(fault, over=int(more[0]))
    return replace(fault, share=float(more[0])) if more else fault


def main(arguments: list[str] | None = None) -> int:
    """Write the laboratory and tell what was written."""
    parser = argparse.ArgumentParser(prog="python -m synthetic_streams", description=__doc__)
    parser.add_argument("folder")
    parser.add_argument("--days", type=int, default=120, help="days of history; two live days follow")
    parser.add_argument("--volume", type=float, default=1.0, help="factor on the number of specimens")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--fault", action="append", default=[], help="STREAM,KIND,SIZE,HOURS[,RESULTS or SHARE]")
    given = parser.parse_args(arguments)
    try:
        faults = [fault_of(text, given.days) for text in given.fault] or None
        told = write_laboratory(given.folder, given.days, given.volume, given.seed, faults)
    except ValueError as problem:
        parser.error(str(problem))
    sys.stdout.write(
        f"{told.folder}: {told.rows:,} rows of history ({told.bytes:,} bytes), {told.taken:,} of them clean results; "
        f"{told.live:,} live results in {told.messages:,} messages\n"
    )
    return 0


if __name__ == "__main__":
    sys.exit(main())
