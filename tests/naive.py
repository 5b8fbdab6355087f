"""Slow, obvious twins of what pbm computes, written from the definitions and sharing no code with it."""

import itertools
import math
import statistics
from collections.abc import Callable, Sequence
from decimal import ROUND_HALF_EVEN, Decimal
from fractions import Fraction

Event = Sequence[tuple[int, float]]  # measurements of one control event in order: level, and SD from that level's mean


def first_rejected(notations: Sequence[str], events: Sequence[Event], within_event: bool = False) -> int | None:
    """The first event that any of the control rules rejects, or None.

    After each event the whole past is laid out anew, and every window that ends within the newest event is counted.
    """
    for newest in range(len(events)):
        seen = [events[newest]] if within_event else list(events[: newest + 1])
        if any(_rejects(notation, seen) for notation in notations):
            return newest
    return None


def _rejects(notation: str, events: Sequence[Event]) -> bool:
    values = [z for _, z in events[-1]]
    if notation.startswith("R-"):
        if notation.endswith("-opposite"):
            half = float(notation[2:].removesuffix("s-opposite")) / 2
            return any(z > half for z in values) and any(z < -half for z in values)
        return max(values) - min(values) > float(notation[2:].removesuffix("s"))
    needed, window, limit = _count(notation)
    levels = {level for level, _ in events[-1]}
    sequences = [([z for event in events for _, z in event], len(events[-1]))]
    for chosen in levels:
        own = [z for event in events for level, z in event if level == chosen]
        sequences.append((own, sum(level == chosen for level, _ in events[-1])))
    return any(_found(sequence, new, needed, window, limit) for sequence, new in sequences)


def _count(notation: str) -> tuple[int, int, float]:
    if notation.endswith("x"):
        return int(notation[:-1]), int(notation[:-1]), 0.0
    share, limit = notation.removesuffix("s").split("-")
    needed, _, window = share.partition("of")
    return int(needed), int(window or needed), float(limit)


def _found(sequence: list[float], new: int, needed: int, window: int, limit: float) -> bool:
    for end in range(len(sequence) - new + 1, len(sequence) + 1):
        looked_at = sequence[max(0, end - window) : end]
        if sum(z > limit for z in looked_at) >= needed or sum(z < -limit for z in looked_at) >= needed:
            return True
    return False


def moving_mean(z: Sequence[float], window: int) -> list[float]:
    """Mean of the last `window` values."""
    return _of_window(z, window, statistics.fmean)


def moving_median(z: Sequence[float], window: int) -> list[float]:
    """Median of the last `window` values."""
    return _of_window(z, window, statistics.median)


def moving_sd(z: Sequence[float], window: int) -> list[float]:
    """Sample SD of the last `window` values, in exact arithmetic until the root."""
    return _of_window(z, window, lambda values: float(statistics.stdev(map(Fraction, values))))


def moving_share(z: Sequence[float], window: int, low: float, high: float) -> list[float]:
    """Part of the last `window` values outside [low, high]."""
    return _of_window(z, window, lambda values: sum(not low <= x <= high for x in values) / window)


def _of_window(z: Sequence[float], window: int, of: Callable[[Sequence[float]], float]) -> list[float]:
    return [float(of(z[i + 1 - window : i + 1])) if i + 1 >= window else math.nan for i in range(len(z))]


def ewma(z: Sequence[float], weight: float, centre: float) -> list[float]:
    """Weighted mean of the centre and all values, the weights written out."""
    return [_weighted([centre, *z[: i + 1]], weight) for i in range(len(z))]


def ewsd(z: Sequence[float], weight: float, level: float, centre: float) -> list[float]:
    """Root of the weighted mean of squared deviations, the weights written out."""
    squares = [(x - level) ** 2 for x in z]
    return [math.sqrt(_weighted([centre**2, *squares[: i + 1]], weight)) for i in range(len(z))]


def _weighted(values: Sequence[float], weight: float) -> float:
    newest = len(values) - 1
    weights = [(weight if i else 1.0) * (1 - weight) ** (newest - i) for i in range(len(values))]
    return math.fsum(w * x for w, x in zip(weights, values, strict=True))


def cusum(z: Sequence[float], reference: float, level: float, spread: float) -> list[float]:
    """The largest drift of any tail of the values beyond the reference, upwards or downwards, with its sign."""
    u = [(x - level) / spread for x in z]

    def largest(side: int, newest: int) -> float:
        tails = itertools.accumulate(side * x - reference for x in reversed(u[: newest + 1]))
        return max(0.0, *tails)

    sums = [(largest(1, i), largest(-1, i)) for i in range(len(u))]
    return [up if up >= down else -down for up, down in sums]


def batch_mean(z: Sequence[float], size: int, exponent: float, centre: float) -> list[float]:
    """The estimate after each whole batch, batch by batch."""
    out = [math.nan] * len(z)
    for first in range(0, len(z) - size + 1, size):
        powers = [math.copysign(abs(x - centre) ** exponent, x - centre) for x in z[first : first + size]]
        mean = math.fsum(powers) / size
        centre += math.copysign(abs(mean) ** (1 / exponent), mean)
        out[first + size - 1] = centre
    return out


def admitted(x: float, censor: int, low: float, high: float, winsorize: bool, places: Sequence[float]) -> float:
    """What a result counts as, by trying every value that it may stand for; NaN if it is dropped.

    `places` are the values tried: "<x" stands for those below x, ">x" for those above; where these do not all lie on the same side of the
    limits, the true place is not known.
    """
    stands_for = [t for t in places if (t < x if censor < 0 else t > x if censor > 0 else t == x)]
    sides = {"below" if t < low else "above" if t > high else "inside" for t in stands_for}
    if len(sides) != 1:
        return math.nan
    outside = low if sides == {"below"} else high
    return x if sides == {"inside"} else outside if winsorize else math.nan


def alarms(path: Sequence[float], low: float, high: float, centre: float, rearm: float) -> list[tuple[int, int, float]]:
    """Index, side and furthest value of each alarm: find the first value outside, then the first one back in the band, and again."""
    found = []
    newest = 0
    while newest < len(path):
        outside = [i for i in range(newest, len(path)) if path[i] > high or path[i] < low]
        if not outside:
            break
        first = outside[0]
        ends = [centre - rearm * (centre - low), centre + rearm * (high - centre)]
        back = [i for i in range(first + 1, len(path)) if ends[0] <= path[i] <= ends[1]]
        newest = back[0] if back else len(path)
        seen = [x for x in path[first:newest] if not math.isnan(x)]
        found.append((first, 1, max(seen)) if path[first] > high else (first, -1, min(seen)))
    return found


def reported(raw: float, step: str, low: float, high: float) -> tuple[float, int]:
    """Rounded to the step in decimal arithmetic (a half goes to the even multiple), then printed as "<low" or ">high" where beyond."""
    count = int((Decimal(raw) / Decimal(step)).quantize(Decimal(1), rounding=ROUND_HALF_EVEN))
    value = float(count * Decimal(step))
    return (low, -1) if value < low else (high, 1) if value > high else (value, 0)


def unreliable_results(
    onset: int, stop: int, end: int, events: Sequence[int], p: Sequence[float], passed: Sequence[float]
) -> tuple[float, float]:
    """Expected unreliable results reported, and of these final, bracket by bracket as the formulas have them.

    `events` are the places of the first result after each control event of the whole history, `p` the chances from the onset on (p[0] is
    the onset's own), `passed` the chances S_0, S_1 ... Reporting stops after `stop` affected results, or
    (for the final ones) the alarm comes with that one; nothing is followed beyond `end`.
    """
    since = [e for e in events if onset < e < end]
    ends = [*since, end]
    reported = final = 0.0
    begin = onset
    for i, close in enumerate(ends):
        inside = [p[j - onset] for j in range(begin, close)]
        before_stop = [p[j - onset] for j in range(begin, close) if j < onset + stop]
        reported += passed[i] * math.fsum(before_stop)
        if i < len(since) and close < onset + stop:
            final += passed[i + 1] * math.fsum(inside)
        begin = close
    return reported, final


def detections(
    onset: int, end: int, events: Sequence[int], passed: Sequence[float], alarm: int | None
) -> dict[int | None, float]:
    """Chance of each number of affected results until the fault is found, by events until the alarm comes; None: not within the horizon."""
    chances: dict[int | None, float] = {}
    still = 1.0
    for k, count in enumerate(e - onset for e in events if onset < e < end):
        if alarm is not None and count >= alarm:  # the event would come after the alarm
            break
        chances[count] = chances.get(count, 0.0) + passed[k] - passed[k + 1]
        still -= passed[k] - passed[k + 1]
    chances[alarm] = chances.get(alarm, 0.0) + still
    return chances
