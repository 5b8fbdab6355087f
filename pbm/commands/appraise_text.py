"""An appraisal as the terminal shows it, and what differs between two."""

from pathlib import Path

from pbm.commands.tables import table
from pbm.io.appraisal_file import differences
from pbm.records.appraisal import Appraisal, Bench, StreamAppraisal
from pbm.records.figures import WorstCase
from pbm.records.judged import FalseAlarms, Judged

MOST_TOLD = 20
EXPLAINED = (
    "Unreliable results expected from one error until it is found, at the size where that is worst: the controls alone ->\n"
    "with the monitors; and those of them released before the last accepted control event. They are model figures that\n"
    "depend on TEa, analytic SD and the history given. The monitor supplements control materials and never replaces\n"
    "them; limits and actions are the laboratory director's decision under local regulation."
)


def told(appraisal: Appraisal, reports: Path) -> str:
    """The streams with a monitor in a table, those without with the reason, and the bench as a whole."""
    rows = [
        _row(one, one.judged, one.judged.false_alarms)
        for one in appraisal.streams
        if one.judged and one.judged.false_alarms
    ]
    without = [f"{one.stream}: {one.verdict}: {one.reason}" for one in appraisal.streams if not one.monitors]
    head = ["stream", "verdict", "unreliable results", "of these final", "held-out alarms"]
    parts = (
        [table(head, rows)] * bool(rows) + ["\n".join(without)] * bool(without) + [_bench(appraisal.bench)] * bool(rows)
    )
    return "\n\n".join([*parts, EXPLAINED, f"Report: {reports / 'appraisal.html'}"])


def _row(stream: StreamAppraisal, judged: Judged, alarms: FalseAlarms) -> list[str]:
    kept = "kept" if alarms.kept else "NOT KEPT"
    return [
        stream.stream,
        stream.verdict,
        _pair(judged.worst_unreliable),
        _pair(judged.worst_final),
        f"{alarms.episodes} in {alarms.days} days, budget {alarms.allowed:.1f}: {kept}",
    ]


def _pair(worst: WorstCase) -> str:
    return f"{worst.alone.value:.3g} -> {worst.with_monitor.value:.3g} ({worst.share_fewer.value:.0%} fewer)"


def _bench(bench: Bench) -> str:
    month, alone, beside = bench.a_month, bench.unreliable.alone, bench.unreliable.with_monitor
    return (
        f"The bench: {month.value:.3g} false alarms a month ({month.low:.3g} to {month.high:.3g}; budgets {bench.allowed_a_month:.3g}); "
        f"at the assumed rate of errors\n{alone.value:.3g} unreliable results a year with the controls alone, "
        f"{beside.value:.3g} with the monitors."
    )


def told_differences(path: Path, given: Appraisal, now: Appraisal) -> tuple[bool, str]:
    """Whether two appraisals hold the same, and what differs; other versions of the tool are told and do not count."""
    found = differences(given, now)
    notes = [f"Note: {one}" for one in found if one.startswith(("made_by", "versions"))]
    counted = [one for one in found if not one.startswith(("made_by", "versions"))]
    if not counted:
        return True, "\n".join(
            [f"{path}: computed anew, every figure of {len(given.streams)} streams is the same.", *notes]
        )
    more = [f"and {len(counted) - MOST_TOLD} more"] * (len(counted) > MOST_TOLD)
    head = f"{path}: computed anew, {len(counted)} {'entry differs' if len(counted) == 1 else 'entries differ'} (in the file -> now):"
    return False, "\n".join([head, *(f"  {one}" for one in (*counted[:MOST_TOLD], *more)), *notes])
