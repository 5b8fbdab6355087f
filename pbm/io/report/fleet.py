"""The summary: every monitor of the laboratory sorted by what it gains, and what is not covered, with the reason."""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

from pbm.io.report import words
from pbm.io.report.shown import ShownMonitor, shown
from pbm.records.appraisal import Appraisal, StreamAppraisal
from pbm.records.figures import AloneAndWith, WorstCase
from pbm.records.judged import FalseAlarms, FaultAppraisal

MONTH = 30
_LITTLE = 0.1
KINDS = {"shift": "shift", "drift": "drift", "noise": "noise (imprecision)", "sporadic": "sporadic error"}


@dataclass(frozen=True, slots=True)
class FleetRow:
    """One monitor in the table of the summary, or a stream without one.

    Attributes
    ----------
    stream, monitor
        Whose row it is.
    anchor
        Where on the page its section stands.
    number, of
        Which monitor of the stream's how many.
    """

    stream: StreamAppraisal
    monitor: ShownMonitor | None
    anchor: str
    number: int = 1
    of: int = 1

    @property
    def gain(self) -> float:
        """Worst-case expected unreliable results fewer; streams without a monitor come last."""
        if self.monitor is None:
            return float("-inf")
        return self.monitor.worst_unreliable.alone.value - self.monitor.worst_unreliable.with_monitor.value

    @property
    def left(self) -> float:
        """What is left of the worst case, in per cent of the controls alone, for a bar."""
        assert self.monitor is not None  # asked only of rows with a monitor
        worst = self.monitor.worst_unreliable
        return min(100.0, 100 * worst.with_monitor.value / worst.alone.value) if worst.alone.value else 100.0


def anchor(place: int) -> str:
    """Identifier of the section of the stream at a place of the appraisal."""
    return f"stream-{place + 1}"


def fleet_rows(appraisal: Appraisal) -> list[FleetRow]:
    """All monitors, the greatest gain first, then the streams without one."""
    return sorted(_rows(appraisal), key=lambda row: (-row.gain, row.stream.stream, row.number))


def _rows(appraisal: Appraisal) -> Iterator[FleetRow]:
    for place, stream in enumerate(appraisal.streams):
        if not stream.monitors:
            yield FleetRow(stream, None, anchor(place))
        for number, monitor in enumerate(shown(stream), 1):
            yield FleetRow(stream, monitor, anchor(place), number, len(stream.monitors))


def a_month(count: float, alarms: FalseAlarms) -> float:
    """A count over the held-out days, told for a month."""
    return count * MONTH / alarms.days if alarms.days else 0.0


def in_short(appraisal: Appraisal) -> list[str]:
    """The answer in a few sentences."""
    rows = [row for row in fleet_rows(appraisal) if row.monitor is not None]
    told = [_verdicts(appraisal.streams)]
    if not rows:
        return [
            *told,
            "No stream has a monitor that could be judged: the controls alone stand, and this document says why.",
        ]
    alarms = [row.monitor.false_alarms for row in rows if row.monitor]
    kept = sum(one.kept for one in alarms)
    month = words.expected(sum(a_month(one.episodes, one) for one in alarms))
    allowed = words.expected(sum(a_month(one.allowed, one) for one in alarms))
    told.append(
        f"On held-out days {kept} of {len(rows)} {_plural(len(rows), 'monitor')} kept to the alarm budget; all together they "
        f"alarmed {month} times a month without a known error (budget {allowed})."
    )
    return [*told, _greatest(rows[0])] if rows[0].gain > 0 else told


def _verdicts(streams: Iterable[StreamAppraisal]) -> str:
    verdicts = [stream.verdict for stream in streams]
    counts = [(verdicts.count(one), one) for one in ("useful", "marginal", "not useful here")]
    told = ", ".join(f"{count} {verdict}" for count, verdict in counts if count)
    return f"{len(verdicts)} {_plural(len(verdicts), 'stream')} judged" + (f": {told}." if told else ".")


def _greatest(row: FleetRow) -> str:
    assert row.monitor is not None  # called for rows with a monitor
    worst = row.monitor.worst_unreliable
    return (
        f"The greatest gain is in {row.stream.stream}: in the worst case {words.expected(worst.alone.value)} unreliable results are "
        f"expected with the controls alone and {words.expected(worst.with_monitor.value)} with the monitor "
        f"({words.fewer(worst.alone.value, worst.with_monitor.value)})."
    )


@dataclass(frozen=True, slots=True)
class Gaps:
    """One way in which something is not covered, and where: pairs of a stream and what is said of it."""

    title: str
    places: tuple[tuple[str, str], ...]


def gaps(appraisal: Appraisal) -> list[Gaps]:
    """What is not covered in this laboratory: streams, alarm budgets, errors that stay unfound, kinds of error not tried."""
    streams = appraisal.streams
    found = [
        Gaps("No monitor that is clearly useful", tuple(_verdict_and_reason(streams))),
        Gaps("Alarm budget not kept on held-out days", tuple(_budgets_not_kept(streams))),
        Gaps("Worst case lowered by less than a tenth", tuple(_worst_case_hardly_lower(streams))),
        Gaps(
            "Errors at which the monitor saves less than a tenth of the unreliable results",
            tuple(_errors(streams, little_helped)),
        ),
        Gaps(
            "Errors of which more than half are never found while followed, even with the monitor",
            tuple(_errors(streams, never_found)),
        ),
        Gaps("Kinds of error not tried in this appraisal", tuple(_not_tried([one for one in streams if one.monitors]))),
    ]
    return [one for one in found if one.places]


def _verdict_and_reason(streams: Iterable[StreamAppraisal]) -> Iterator[tuple[str, str]]:
    for stream in streams:
        if not stream.monitors or stream.verdict != "useful":
            yield stream.stream, f"{stream.verdict}. {words.sentence(stream.reason)}".strip()


def _budgets_not_kept(streams: Iterable[StreamAppraisal]) -> Iterator[tuple[str, str]]:
    for stream in streams:
        for alarms in (monitor.false_alarms for monitor in shown(stream)):
            if not alarms.kept:
                yield stream.stream, f"{words.whole(alarms.episodes)} alarms, {words.expected(alarms.allowed)} allowed"


def _worst_case_hardly_lower(streams: Iterable[StreamAppraisal]) -> Iterator[tuple[str, str]]:
    for stream in streams:
        for worst in (monitor.worst_unreliable for monitor in shown(stream)):
            if _hardly_lower(worst):
                alone, beside = words.expected(worst.alone.value), words.expected(worst.with_monitor.value)
                yield stream.stream, f"{alone} alone, {beside} with the monitor"


def _hardly_lower(found: AloneAndWith | WorstCase) -> bool:
    return found.with_monitor.value > (1 - _LITTLE) * found.alone.value


def _errors(
    streams: Iterable[StreamAppraisal], which: Callable[[ShownMonitor], list[FaultAppraisal]]
) -> Iterator[tuple[str, str]]:
    for stream in streams:
        for faults in filter(None, map(which, shown(stream))):
            yield stream.stream, listed(faults, stream.unit)


def _not_tried(judged: list[StreamAppraisal]) -> Iterator[tuple[str, str]]:
    """Kinds of error that no monitor of a stream was tried on, those missing in the same streams together."""
    missing: dict[tuple[str, ...], list[str]] = {}
    for kind, name in KINDS.items():
        without = tuple(
            one.stream
            for one in judged
            if kind not in {fault.kind for monitor in shown(one) for fault in monitor.faults}
        )
        if without:
            missing.setdefault(without, []).append(name)
    for streams, kinds in missing.items():
        yield "all streams" if len(streams) == len(judged) else ", ".join(streams), ", ".join(kinds)


def where_it_does_not_help(stream: StreamAppraisal, monitor: ShownMonitor) -> Iterator[str]:
    """Errors for which a monitor saves little, or that are mostly not found even with it."""
    if faults := little_helped(monitor):
        yield f"Saves less than a tenth of the unreliable results at: {listed(faults, stream.unit)}."
    if faults := never_found(monitor):
        yield f"More than half never found within {words.days(stream.horizon_days)}, even with the monitor: {listed(faults, stream.unit)}."


def never_found(monitor: ShownMonitor) -> list[FaultAppraisal]:
    """Errors of which controls and monitor together do not find half within the horizon."""
    return [fault for fault in monitor.faults if fault.until.both.median is None]


def little_helped(monitor: ShownMonitor) -> list[FaultAppraisal]:
    """Errors for which the monitor saves less than a tenth of the unreliable results."""
    return [fault for fault in monitor.faults if _hardly_lower(fault.unreliable)]


def listed(faults: Iterable[FaultAppraisal], analyte_unit: str) -> str:
    """Errors in short, those of one kind and size together: "shift ±0.25, +0.5 TEa; noise 1.5 times the analytic SD"."""
    kinds: dict[tuple[str, str], dict[float, list[FaultAppraisal]]] = {}
    for fault in faults:
        kind = words.kind_in_words(fault.kind), words.unit_in_words(fault.unit, analyte_unit)
        kinds.setdefault(kind, {}).setdefault(fault.size, []).append(fault)
    return "; ".join(f"{kind} {', '.join(map(_sizes, sizes.values()))} {unit}" for (kind, unit), sizes in kinds.items())


def _sizes(faults: list[FaultAppraisal]) -> str:
    """One size, with both signs where both are meant."""
    size = words.size_of(faults[0])
    return f"±{size[1:]}" if {fault.sign for fault in faults} == {-1, 1} else size


def named(monitor: ShownMonitor, label: str, analyte_unit: str) -> str:
    """The error that a label stands for, in the words used everywhere else on the page."""
    return next((words.fault_in_words(fault, analyte_unit) for fault in monitor.faults if fault.label == label), label)


def judged_on(appraisal: Appraisal) -> str:
    """On which days the monitors were judged: the first and last held-out day over all streams."""
    if not appraisal.streams:
        return ""
    first, last = min(one.first_day for one in appraisal.streams), max(one.last_day for one in appraisal.streams)
    return f"Judged on the laboratory’s own results of {first} to {last}, days on which no monitor was chosen or tuned."


def simulated(monitor: ShownMonitor) -> str:
    """How exact the chances of the control rules are."""
    error = max((fault.schedule_error for fault in monitor.faults), default=0.0)
    if error == 0:
        return "The control rules' chances are exact."
    return f"The control rules' chances are simulated, with a standard error of at most {words.percent(error)}."


def _plural(count: int, word: str) -> str:
    return word if count == 1 else f"{word}s"
