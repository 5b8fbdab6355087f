"""What is not covered and where a monitor does not help: of the laboratory in a few lines, and of one stream."""

from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass

from pbm.io.report import fault_words, words
from pbm.records.appraisal import Appraisal, StreamAppraisal
from pbm.records.figures import AloneAndWith
from pbm.records.judged import FaultAppraisal, Judged, OnsetTime

LITTLE = 0.1
_FEW = 3
Which = Callable[[Judged], list[FaultAppraisal]]


@dataclass(frozen=True, slots=True)
class Gap:
    """One way in which something is not covered, and where."""

    title: str
    told: str


def gaps(appraisal: Appraisal) -> list[Gap]:
    """What is not covered in this laboratory; each way in a line, however many streams there are."""
    streams = appraisal.streams
    watched = [one for one in streams if one.monitors and one.judged]
    judged = [one.judged for one in watched if one.judged]
    found = [
        Gap("Without a monitor, for the reason in the table", _names(one for one in streams if not one.monitors)),
        Gap("A monitor that does not pay", _names(one for one in watched if one.verdict == "not useful here")),
        Gap("A monitor that pays only in part (marginal)", _names(one for one in watched if one.verdict == "marginal")),
        Gap("Alarm budget not kept on held-out days", "; ".join(_budgets_not_kept(watched))),
        Gap("Worst error lowered by less than a tenth", _names(one for one in watched if _worst_hardly_lower(one))),
        Gap("Saves less than a tenth of the unreliable results", _by_error(judged, little_helped)),
        Gap("More than half never found while followed, even with the monitor", _by_error(judged, never_found)),
        Gap("Nights and weekends, with few patients", _slowest(watched)),
        Gap("Kinds of error not tried", "; ".join(_not_tried(watched))),
    ]
    return [one for one in found if one.told]


def _names(streams: Iterable[StreamAppraisal]) -> str:
    return ", ".join(one.stream for one in streams)


def _budgets_not_kept(streams: Iterable[StreamAppraisal]) -> Iterator[str]:
    for stream in streams:
        alarms = stream.judged.false_alarms if stream.judged else None
        if alarms is not None and not alarms.kept:
            yield f"{stream.stream} ({words.whole(alarms.episodes)} alarms, {words.expected(alarms.allowed)} allowed)"


def _worst_hardly_lower(stream: StreamAppraisal) -> bool:
    return stream.judged is not None and _hardly_lower(stream.judged.worst_unreliable)


def _hardly_lower(found: AloneAndWith) -> bool:
    return found.with_monitor.value > (1 - LITTLE) * found.alone.value


def _by_error(judged: Sequence[Judged], which: Which) -> str:
    """Errors, and in how many of the streams on which they were tried."""
    tried = Counter(key for one in judged for key in {_key(fault) for fault in one.faults})
    found = Counter(key for one in judged for key in {_key(fault) for fault in which(one)})
    kinds: dict[tuple[str, str, str], list[str]] = {}
    for (kind, unit, course, size), count in sorted(found.items(), key=lambda one: one[0]):
        kinds.setdefault((kind, unit, course), []).append(f"{size:.3g} in {count} of {tried[kind, unit, course, size]}")
    return "; ".join(
        " ".join(filter(None, [kind, unit and f"({unit})", course, ", ".join(told)]))
        for (kind, unit, course), told in kinds.items()
    ) + (" streams" if kinds else "")


def _key(fault: FaultAppraisal) -> tuple[str, str, str, float]:
    unit = fault_words.unit_of(fault, "the result’s unit")
    return fault_words.kind_of(fault), unit, fault_words.course_of(fault), fault.size


def _slowest(streams: Sequence[StreamAppraisal]) -> str:
    """Where an error that begins outside the daytime stays longest."""
    later = [(stream, part) for stream in streams for part in _parts(stream) if part.when != "day"]
    if not later:
        return ""
    stream, part = max(later, key=lambda one: one[1].until_hours.both.value)
    day = next((one for one in _parts(stream) if one.when == "day"), None)
    beside = f" ({words.number(day.until_hours.both.value)} h where it begins in the daytime)" if day else ""
    return (
        f"slowest is {stream.stream}, where an error that begins {in_words(part)} is found after "
        f"{words.number(part.until_hours.both.value)} h on average{beside}"
    )


def in_words(part: OnsetTime) -> str:
    """A part of the week, as the beginning of something."""
    return {"day": "in the daytime", "night": "at night", "weekend": "at a weekend"}[part.when]


def _parts(stream: StreamAppraisal) -> tuple[OnsetTime, ...]:
    return stream.judged.by_onset if stream.judged else ()


def _not_tried(watched: Sequence[StreamAppraisal]) -> Iterator[str]:
    """Kinds of error that were not tried, those missing on the same streams together."""
    missing: dict[tuple[str, ...], list[str]] = {}
    for kind, name in fault_words.KINDS.items():
        without = tuple(
            one.stream for one in watched if one.judged and kind not in {fault.kind for fault in one.judged.faults}
        )
        if without:
            missing.setdefault(without, []).append(name)
    for streams, kinds in missing.items():
        named = len(streams) <= _FEW
        where = ", ".join(streams) if named else f"{len(streams)} of {len(watched)} streams"
        yield f"{', '.join(kinds)} on {'any stream' if len(streams) == len(watched) else where}"


def where_it_does_not_help(stream: StreamAppraisal, judged: Judged) -> Iterator[str]:
    """Errors for which the monitors save little, or that are mostly not found even with them; and what `--check` objects to."""
    if faults := little_helped(judged):
        yield f"Saves less than a tenth of the unreliable results at: {fault_words.listed(faults, stream.unit)}."
    if faults := [one for one in judged.faults if one.no_more_than_false_alarms]:
        yield f"Finds no more than its false alarms would at: {fault_words.listed(faults, stream.unit)}."
    if faults := never_found(judged):
        within = f"within {words.days(stream.horizon_days)}, even with the monitor"
        yield f"More than half never found {within}: {fault_words.listed(faults, stream.unit)}."
    yield from (f"Objection of pbm appraise --check: {words.sentence(one)}" for one in judged.objections)


def never_found(judged: Judged) -> list[FaultAppraisal]:
    """Errors of which controls and monitors together do not find half within the horizon."""
    return [fault for fault in judged.faults if fault.until.both.median.value is None]


def little_helped(judged: Judged) -> list[FaultAppraisal]:
    """Errors for which the monitors save less than a tenth of the unreliable results."""
    return [fault for fault in judged.faults if _hardly_lower(fault.unreliable)]


def simulated(judged: Judged) -> str:
    """How exact the chances of the control rules are."""
    error = max((fault.schedule_error for fault in judged.faults), default=0.0)
    if error == 0:
        return "The control rules’ chances are exact."
    return f"The control rules’ chances are simulated, with a standard error of at most {words.percent(error)}."
