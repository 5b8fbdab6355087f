"""What `pbm tune` prints: a line for each stream, and why where a monitor is less than useful."""

from pathlib import Path

from pbm.commands.tables import table
from pbm.records.plan import MonitorPlan, StreamPlan
from pbm.stages.words import monitor_in_brief


def told(path: Path, streams: dict[str, StreamPlan]) -> str:
    """The table of the streams just tuned, and the file that holds their plan."""
    rows = [[name, s.verdict, _in_brief(s), _held_out(s)] for name, s in streams.items()]
    why = [f"{name}: {s.verdict}: {s.reason}" for name, s in streams.items() if s.verdict != "useful"]
    return "\n".join(
        [table(["stream", "verdict", "monitor", "held-out alarms"], rows), "", *why, "", f"Written: {path}"]
    )


def _in_brief(stream: StreamPlan) -> str:
    return "; ".join(monitor_in_brief(m) for m in stream.monitors) or "none"


def _held_out(stream: StreamPlan) -> str:
    return "; ".join(_against_budget(m) for m in stream.monitors) or "-"


def _against_budget(monitor: MonitorPlan) -> str:
    found = monitor.held_out
    if found is None:
        return "-"
    kept = "" if found.kept else ", NOT KEPT"
    return f"{found.episodes} in {found.days} days (budget {monitor.budget_per_day * found.days:.1f}{kept})"
