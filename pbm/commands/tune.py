"""`pbm tune [STREAM...]`: choose monitors on the history and write plan.toml."""

from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption, SeedOption, WorkersOption

if TYPE_CHECKING:
    from pbm.records.plan import MonitorPlan, Plan, StreamPlan

StreamsArgument = Annotated[
    list[str] | None, typer.Argument(metavar="[STREAM...]", help="Streams such as sodium@line-2.", show_default="all")
]


def tune(
    streams: StreamsArgument = None,
    lab: LabOption = None,
    workers: WorkersOption = None,
    seed: SeedOption = 1,
    json: JsonOption = False,
) -> None:
    """Choose each stream's monitor by simulating errors on its history, and write plan.toml.

    The first two thirds of the days train, the last third confirms. A stream on which a monitor does not pay is said so, with the reason.

    Example:  pbm tune sodium@line-1 sodium@line-2
    """
    from pbm.commands.lab import read_checked_lab
    from pbm.commands.work import chosen_streams, over_streams, report_failures
    from pbm.io.plan_file import write_plan
    from pbm.stages.tune import tune_stream

    folder = LabFolder.find(lab)
    laboratory = read_checked_lab(folder.lab)
    names = chosen_streams(folder.history, streams)
    done = over_streams(folder.history, names, partial(tune_stream, lab=laboratory, seed=seed), workers, "Tuning")
    tuned = {str(d.name): d.result for d in done if d.result is not None}
    plan = _merged(folder, tuned, seed, keep=bool(streams))
    if tuned:
        write_plan(folder.plan, plan)
    typer.echo(
        plan.model_dump_json(indent=2) if json else _told(folder.plan, {name: plan.streams[name] for name in tuned})
    )
    report_failures(done)


def _merged(folder: LabFolder, tuned: "dict[str, StreamPlan]", seed: int, *, keep: bool) -> "Plan":
    """The new plan; where only some streams were tuned, the others of an existing plan are kept."""
    from datetime import UTC, datetime

    from pbm import __version__
    from pbm.commands.versions import versions
    from pbm.io.history import history_mark
    from pbm.io.lab_file import lab_fingerprint
    from pbm.io.plan_file import read_plan
    from pbm.records.plan import Made, Plan

    before = read_plan(folder.plan).streams if keep and folder.plan.exists() else {}
    made = Made(
        by=f"pbm {__version__}",
        at=datetime.now(UTC).replace(microsecond=0),
        history=history_mark(folder.history),
        seed=seed,
        lab_sha256=lab_fingerprint(folder.lab),
        versions=versions(),
    )
    return Plan(made=made, streams=dict(sorted({**before, **tuned}.items())))


def _told(path: Path, streams: "dict[str, StreamPlan]") -> str:
    from pbm.commands.tables import table

    rows = [[name, s.verdict, _in_brief(s), _held_out(s)] for name, s in streams.items()]
    why = [f"{name}: {s.verdict}: {s.reason}" for name, s in streams.items() if s.verdict != "useful"]
    return "\n".join(
        [table(["stream", "verdict", "monitor", "held-out alarms"], rows), "", *why, "", f"Written: {path}"]
    )


def _in_brief(stream: "StreamPlan") -> str:
    from pbm.stages.words import monitor_in_brief

    return "; ".join(monitor_in_brief(m) for m in stream.monitors) or "none"


def _held_out(stream: "StreamPlan") -> str:
    return "; ".join(_against_budget(m) for m in stream.monitors) or "-"


def _against_budget(monitor: "MonitorPlan") -> str:
    found = monitor.held_out
    if found is None:
        return "-"
    kept = "" if found.kept else ", NOT KEPT"
    return f"{found.episodes} in {found.days} days (budget {monitor.budget_per_day * found.days:.1f}{kept})"
