"""The bench as a whole: alarms a month that its staff will see, and unreliable results a year, streams taken as independent."""

from collections.abc import Callable, Sequence

from pbm.methods.intervals import sum_interval, weighted_poisson_interval
from pbm.records.appraisal import Bench, StreamAppraisal
from pbm.records.figures import AloneAndWith, Figure
from pbm.records.judged import FalseAlarms, Judged
from pbm.stages.appraise.false_alarms import MONTH
from pbm.stages.appraise.written import rounded


def bench_of(streams: Sequence[StreamAppraisal]) -> Bench:
    """All streams together."""
    judged = [one.judged for one in streams if one.judged is not None]
    alarms = [one.false_alarms for one in judged if one.false_alarms is not None]
    a_month = _a_month(alarms)
    allowed = sum(one.allowed * MONTH / one.days for one in alarms)
    return Bench(
        streams=len(alarms),
        monitors=sum(len(one.monitors) for one in streams),
        a_month=a_month,
        allowed_a_month=rounded(allowed),
        kept=a_month.low <= allowed,
        unreliable=_together(judged, lambda one: one.yearly.unreliable),
        unreliable_final=_together(judged, lambda one: one.yearly.unreliable_final),
    )


def _a_month(alarms: Sequence[FalseAlarms]) -> Figure:
    counts, weights = [one.episodes for one in alarms], [MONTH / one.days for one in alarms]
    low, high = weighted_poisson_interval(counts, weights)
    value = sum(count * weight for count, weight in zip(counts, weights, strict=True))
    return Figure(value=rounded(value), low=rounded(low), high=rounded(high))


def _together(judged: Sequence[Judged], which: Callable[[Judged], AloneAndWith]) -> AloneAndWith:
    found = [which(one) for one in judged]
    alone, fewer = _sum([one.alone for one in found]), _sum([one.fewer for one in found])
    return AloneAndWith(
        alone=alone,
        with_monitor=_sum([one.with_monitor for one in found]),
        fewer=fewer,
        share_fewer=_share(fewer, alone),
    )


def _sum(figures: Sequence[Figure]) -> Figure:
    value, low, high = sum_interval([(one.value, one.low, one.high) for one in figures])
    return Figure(value=rounded(value), low=rounded(max(low, 0.0)), high=rounded(high))


def _share(fewer: Figure, alone: Figure) -> Figure:
    """Of the sum alone; its interval is that of the difference, over the same sum."""
    whole = alone.value or 1.0
    return Figure(
        value=rounded(fewer.value / whole), low=rounded(fewer.low / whole), high=rounded(min(fewer.high / whole, 1.0))
    )
