"""Errors of one kind in several sizes: what one plot shows along its axis of sizes."""

from collections.abc import Iterable
from dataclasses import dataclass
from itertools import pairwise

from pbm.io.report import fault_words
from pbm.records.judged import FaultAppraisal


@dataclass(frozen=True, slots=True)
class FaultGroup:
    """Errors of one kind in several sizes, ordered by signed size.

    Attributes
    ----------
    kind
        "shift", "drift", "noise", "sporadic error"; of a drift and a sporadic error with its course.
    unit
        What sizes are measured in, in words.
    faults
        The errors.
    """

    kind: str
    unit: str
    faults: tuple[FaultAppraisal, ...]

    @property
    def sizes(self) -> tuple[float, ...]:
        """Signed sizes, ascending."""
        return tuple(signed_size(fault) for fault in self.faults)

    @property
    def axis(self) -> str:
        """What stands beside the axis of sizes."""
        return f"size of the {fault_words.kind_of(self.faults[0])}, {self.unit}"

    @property
    def parts(self) -> list[slice]:
        """Errors downwards and upwards: a line never crosses the size 0, which was not tried."""
        cuts = [place for place, (left, right) in enumerate(pairwise(self.sizes), 1) if left < 0 < right]
        return [slice(start, stop) for start, stop in pairwise([0, *cuts, len(self.faults)])]


def signed_size(fault: FaultAppraisal) -> float:
    """Size with its sign; noise has none."""
    return fault.size * fault.sign


def fault_groups(faults: Iterable[FaultAppraisal], analyte_unit: str) -> list[FaultGroup]:
    """Errors that belong on one axis; a second error of the same size starts a group of its own."""
    groups: list[dict[float, FaultAppraisal]] = []
    for fault in faults:
        like = [one for one in groups if _same_axis(next(iter(one.values())), fault) and signed_size(fault) not in one]
        if not like:
            groups.append({})
        (like or groups[-1:])[0][signed_size(fault)] = fault
    return [_ordered(group, analyte_unit) for group in groups]


def _same_axis(one: FaultAppraisal, other: FaultAppraisal) -> bool:
    return (one.kind, one.unit, one.over, one.share) == (other.kind, other.unit, other.over, other.share)


def _ordered(group: dict[float, FaultAppraisal], analyte_unit: str) -> FaultGroup:
    faults = tuple(group[size] for size in sorted(group))
    kind = " ".join(filter(None, [fault_words.kind_of(faults[0]), fault_words.course_of(faults[0])]))
    return FaultGroup(kind, fault_words.unit_of(faults[0], analyte_unit), faults)
