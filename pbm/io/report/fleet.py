"""The summary: every monitor of the laboratory sorted by what it gains, and what is not covered, with the reason."""

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from pbm.io.report import words
from pbm.records.appraisal import Appraisal, FalseAlarms, FaultAppraisal, MonitorAppraisal, StreamAppraisal

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
    monitor: MonitorAppraisal | None
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
        for number, monitor in enumerate(stream.monitors, 1):
            yield FleetRow(stream, monitor, anchor(place), number, len(stream.monitors))


def a_month(count: float, alarms: FalseAlarms) -> float:
    """A count over the held-out days, told for a month."""
    return count * MONTH / alarms.days if alarms.days else 0.0


def in_short(appraisal: Appraisal) -> list[str]:
    """The answer in a few sentences."""
    rows = [row for row in fleet_rows(appraisal) if row.monitor is not None]
    told = [_verdicts(appraisal.streams)]
    if not rows:
        return [*told, "No stream has a monitor that could be judged: the controls alone stand, and this document says why."]
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
class Gap:
    """Something that is not covered: where, and why."""

    where: str
    why: str


def gaps(appraisal: Appraisal) -> list[Gap]:
    """What is not covered in this laboratory: streams, alarm budgets, errors that stay unfound, kinds of error not tried."""
    found = [Gap(stream.stream, " ".join(whys)) for stream in appraisal.streams if (whys := list(_shortcomings(stream)))]
    return found + _not_tried([stream for stream in appraisal.streams if stream.monitors])


def _shortcomings(stream: StreamAppraisal) -> Iterator[str]:
    if not stream.monitors or stream.verdict != "useful":
        yield f"{stream.verdict}. {stream.reason}".strip()
    for monitor in stream.monitors:
        alarms = monitor.false_alarms
        if not alarms.kept:
            yield f"The alarm budget was not kept ({words.whole(alarms.episodes)} alarms, {words.expected(alarms.allowed)} allowed)."
        yield from where_it_does_not_help(stream, monitor)


def where_it_does_not_help(stream: StreamAppraisal, monitor: MonitorAppraisal) -> Iterator[str]:
    """Errors for which a monitor saves little, or that are mostly not found even with it."""
    if faults := little_helped(monitor):
        yield f"Saves less than a tenth of the unreliable results at: {listed(faults, stream.unit)}."
    if faults := never_found(monitor):
        yield f"More than half never found within {words.days(stream.horizon_days)}, even with the monitor: {listed(faults, stream.unit)}."


def never_found(monitor: MonitorAppraisal) -> list[FaultAppraisal]:
    """Errors of which controls and monitor together do not find half within the horizon."""
    return [fault for fault in monitor.faults if fault.until.both.median is None]


def little_helped(monitor: MonitorAppraisal) -> list[FaultAppraisal]:
    """Errors for which the monitor saves less than a tenth of the unreliable results."""
    return [
        fault
        for fault in monitor.faults
        if fault.unreliable.with_monitor.value > (1 - _LITTLE) * fault.unreliable.alone.value
    ]


def listed(faults: Iterable[FaultAppraisal], analyte_unit: str) -> str:
    """Errors in short, those of one kind together: "shift −0.25, +0.25 TEa; noise 1.5 times the analytic SD"."""
    kinds: dict[tuple[str, str], list[str]] = {}
    for fault in faults:
        kind = words.kind_in_words(fault.kind), words.unit_in_words(fault.unit, analyte_unit)
        kinds.setdefault(kind, []).append(words.size_of(fault))
    return "; ".join(f"{kind} {', '.join(sizes)} {unit}" for (kind, unit), sizes in kinds.items())


def named(monitor: MonitorAppraisal, label: str, analyte_unit: str) -> str:
    """The error that a label stands for, in the words used everywhere else on the page."""
    return next((words.fault_in_words(fault, analyte_unit) for fault in monitor.faults if fault.label == label), label)


def _not_tried(judged: list[StreamAppraisal]) -> list[Gap]:
    """Kinds of error that this appraisal did not try, those missing in the same streams together."""
    missing: dict[tuple[str, ...], list[str]] = {}
    for kind, name in KINDS.items():
        without = tuple(one.stream for one in judged if kind not in {fault.kind for monitor in one.monitors for fault in monitor.faults})
        if without:
            missing.setdefault(without, []).append(name)
    return [
        Gap("All streams" if len(streams) == len(judged) else ", ".join(streams), f"not tried: {', '.join(kinds)}.")
        for streams, kinds in missing.items()
    ]


def judged_days(appraisal: Appraisal) -> str:
    """The first and last held-out day over all streams."""
    if not appraisal.streams:
        return "no stream"
    first, last = min(one.first_day for one in appraisal.streams), max(one.last_day for one in appraisal.streams)
    return f"{first} to {last}"


def simulated(monitor: MonitorAppraisal) -> str:
    """How exact the chances of the control rules are."""
    error = max((fault.schedule_error for fault in monitor.faults), default=0.0)
    if error == 0:
        return "The control rules' chances are exact."
    return f"The control rules' chances are simulated, with a standard error of at most {words.percent(error)}."


def _plural(count: int, word: str) -> str:
    return word if count == 1 else f"{word}s"
