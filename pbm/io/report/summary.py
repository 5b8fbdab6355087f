"""The summary: every stream of the laboratory sorted by what its monitors save in a year, and the answer in a few sentences."""

from collections.abc import Iterable
from dataclasses import dataclass

from pbm.io.report import words
from pbm.io.report.fault_words import named
from pbm.records.appraisal import Appraisal, Bench, StreamAppraisal
from pbm.records.judged import FalseAlarms, Judged

MONTH = 30


@dataclass(frozen=True, slots=True)
class SummaryRow:
    """A stream in the table of the summary.

    Attributes
    ----------
    stream
        Whose row it is.
    anchor
        Where on the page its section stands.
    """

    stream: StreamAppraisal
    anchor: str

    @property
    def judged(self) -> Judged | None:
        """What was judged of a stream with a monitor."""
        return self.stream.judged if self.stream.monitors else None

    @property
    def gain(self) -> float:
        """Expected unreliable results fewer in a year; streams without a monitor come last."""
        return self.judged.yearly.unreliable.fewer.value if self.judged else float("-inf")

    @property
    def left(self) -> float:
        """What is left of a year's count, in per cent of the controls alone, for a bar."""
        assert self.judged is not None  # asked only of rows with a monitor
        year = self.judged.yearly.unreliable
        return max(0.0, min(100.0, 100 * year.with_monitor.value / year.alone.value)) if year.alone.value else 100.0


def anchor(place: int) -> str:
    """Identifier of the section of the stream at a place of the appraisal."""
    return f"stream-{place + 1}"


def summary_rows(appraisal: Appraisal) -> list[SummaryRow]:
    """All streams, the greatest gain first, then those without a monitor."""
    rows = [SummaryRow(stream, anchor(place)) for place, stream in enumerate(appraisal.streams)]
    return sorted(rows, key=lambda row: (-row.gain, row.stream.stream))


def in_short(appraisal: Appraisal) -> list[str]:
    """The answer in a few sentences."""
    watched = [row for row in summary_rows(appraisal) if row.judged is not None]
    told = [_verdicts(appraisal.streams)]
    if not watched:
        return [
            *told,
            "No stream has a monitor that could be judged: the controls alone stand, and this document says why.",
        ]
    alarms = [row.judged.false_alarms for row in watched if row.judged and row.judged.false_alarms]
    told += [_a_year(appraisal), _a_month(appraisal.bench, alarms)]
    return [*told, _greatest(watched[0])] if watched[0].gain > 0 else told


def _verdicts(streams: Iterable[StreamAppraisal]) -> str:
    verdicts = [stream.verdict for stream in streams]
    counts = [(verdicts.count(one), one) for one in ("useful", "marginal", "not useful here")]
    told = ", ".join(f"{count} {verdict}" for count, verdict in counts if count)
    return (
        f"A monitor on each of {len(verdicts)} {_plural(len(verdicts), 'stream')} would be: {told}."
        if told
        else "No stream was judged."
    )


def _a_year(appraisal: Appraisal) -> str:
    year, final = appraisal.bench.unreliable, appraisal.bench.unreliable_final
    return (
        f"In a year with {rates(appraisal)} {words.number(year.alone.value)} unreliable results would be reported with the controls "
        f"alone and {words.number(year.with_monitor.value)} with the monitors beside them: {words.fewer(year)} "
        f"({words.fewer_interval(year)}). Of these, {words.expected(final.alone.value)} and {words.expected(final.with_monitor.value)} "
        "would be final: reported before a control event that passed, so that no look-back corrects them."
    )


def rates(appraisal: Appraisal) -> str:
    """The assumed rate of error conditions."""
    found = sorted({one.judged.yearly.per_year for one in appraisal.streams if one.judged})
    if not found:
        return "no error conditions assumed"
    told = f"{found[0]:g}" if len(found) == 1 else f"{found[0]:g} to {found[-1]:g}"
    return f"{told} error conditions on each stream (an assumption, not an estimate)"


def _a_month(bench: Bench, alarms: list[FalseAlarms]) -> str:
    kept = sum(one.kept for one in alarms)
    return (
        f"The staff would see {words.expected(bench.a_month.value)} false alarms a month on the whole bench "
        f"({words.interval(bench.a_month)}); the budgets allow {words.expected(bench.allowed_a_month)} together: "
        f"{'kept' if bench.kept else 'NOT kept'}. Taken one by one, {kept} of {len(alarms)} {_plural(len(alarms), 'stream')} kept "
        f"to {'its' if len(alarms) == 1 else 'their'} budget."
    )


def _greatest(row: SummaryRow) -> str:
    assert row.judged is not None  # called for rows with a monitor
    worst, faults, unit = row.judged.worst_unreliable, row.judged.faults, row.stream.unit
    return (
        f"The greatest gain is on {row.stream.stream}: its worst error ({named(faults, worst.alone_at, unit)}) lets "
        f"{words.expected(worst.alone.value)} unreliable results out with the controls alone; with the monitor the worst lets out "
        f"{words.expected(worst.with_monitor.value)} ({words.fewer(worst)})."
    )


def allowed_a_month(alarms: FalseAlarms) -> float:
    """The alarm budget, told for a month."""
    return alarms.allowed * MONTH / alarms.days if alarms.days else 0.0


def judged_on(appraisal: Appraisal) -> str:
    """On which days the monitors were judged: the first and last held-out day over all streams."""
    judged = [one for one in appraisal.streams if one.judged is not None]
    if not judged:
        return ""
    first, last = min(one.first_day for one in judged), max(one.last_day for one in judged)
    return f"Judged on the laboratory’s own results of {first} to {last}, days on which no monitor was chosen or tuned."


def _plural(count: int, word: str) -> str:
    return word if count == 1 else f"{word}s"
