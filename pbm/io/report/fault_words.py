"""Errors in the trade's words, such as "shift +0.5 TEa" or "drift −1 TEa over 200 results", alone and several together."""

from collections.abc import Iterable

from pbm.io.report import words
from pbm.records.judged import FaultAppraisal

KINDS = {"shift": "shift", "drift": "drift", "noise": "noise (imprecision)", "sporadic": "sporadic error"}


def kind_of(fault: FaultAppraisal) -> str:
    """A kind of error as people call it."""
    return "sporadic error" if fault.kind == "sporadic" else fault.kind


def unit_of(fault: FaultAppraisal, analyte_unit: str) -> str:
    """What an error's size is measured in."""
    names = {"SD": "analytic SD", "unit": analyte_unit, "percent": "%", "": "times the analytic SD"}
    return names.get(fault.unit, fault.unit)


def size_of(fault: FaultAppraisal) -> str:
    """An error's size with its sign; noise has none."""
    return f"{fault.size:.3g}" if fault.unit == "" else words.signed(fault.sign * fault.size)


def course_of(fault: FaultAppraisal) -> str:
    """How a drift grows or which results a sporadic error hits; nothing for others."""
    over = f"over {words.whole(fault.over)} results" if fault.over is not None else ""
    return over or (f"in {100 * fault.share:.3g}\u202f% of results" if fault.share is not None else "")


def fault_in_words(fault: FaultAppraisal, analyte_unit: str) -> str:
    """An error: "shift +0.5 TEa"."""
    return " ".join(filter(None, [kind_of(fault), size_of(fault), unit_of(fault, analyte_unit), course_of(fault)]))


def shift_in_words(fault: FaultAppraisal, analyte_unit: str) -> str:
    """An error's size in the unit of the analyte, at the median result; nothing where it has none."""
    if fault.shift is None:
        return ""
    return f"{'+' if fault.shift > 0 else ''}{words.number(fault.shift)} {analyte_unit}"


def named(faults: Iterable[FaultAppraisal], label: str, analyte_unit: str) -> str:
    """The error that a label stands for, in the words used everywhere else on the page."""
    return next((fault_in_words(fault, analyte_unit) for fault in faults if fault.label == label), label)


def listed(faults: Iterable[FaultAppraisal], analyte_unit: str) -> str:
    """Errors in short, those of one kind and size together: "shift ±0.25, +0.5 TEa; noise 1.5 times the analytic SD"."""
    kinds: dict[tuple[str, str, str], dict[float, list[FaultAppraisal]]] = {}
    for fault in faults:
        kind = kind_of(fault), unit_of(fault, analyte_unit), course_of(fault)
        kinds.setdefault(kind, {}).setdefault(fault.size, []).append(fault)
    return "; ".join(
        " ".join(filter(None, [kind, ", ".join(map(sizes_of, sizes.values())), unit, course]))
        for (kind, unit, course), sizes in kinds.items()
    )


def sizes_of(faults: list[FaultAppraisal]) -> str:
    """One size, with both signs where both are meant."""
    size = size_of(faults[0])
    return f"±{size[1:]}" if {fault.sign for fault in faults} == {-1, 1} else size
