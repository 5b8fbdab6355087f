"""`pbm appraise [STREAM...]`: judge plan.toml on held-out days; writes reports/appraisal.json and appraisal.html."""

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption, SeedOption, WorkersOption
from pbm.commands.tune import StreamsArgument

if TYPE_CHECKING:
    from pbm.records.appraisal import Appraisal, StreamAppraisal, WorstCase
    from pbm.records.laboratory import Lab
    from pbm.records.plan import StreamPlan
    from pbm.records.stream import StreamHistory

CheckOption = Annotated[
    bool, typer.Option("--check", help="Leave with 1 if a limit was not kept on the held-out days.")
]


def appraise(
    streams: StreamsArgument = None,
    lab: LabOption = None,
    workers: WorkersOption = None,
    seed: SeedOption = 1,
    check: CheckOption = False,
    json: JsonOption = False,
) -> None:
    """Judge the plan on held-out days: what the controls alone catch, what the monitor adds, and how many alarms to expect.

    Example:  pbm appraise
    """
    from pbm.commands.lab import read_checked_lab
    from pbm.commands.work import chosen_streams, over_streams, report_failures
    from pbm.errors import PlanError
    from pbm.io.appraisal_file import write_appraisal
    from pbm.io.plan_file import read_plan
    from pbm.io.report.page import write_report

    folder = LabFolder.find(lab)
    laboratory, plan = read_checked_lab(folder.lab), read_plan(folder.existing_plan())
    names = chosen_streams(folder.history, streams or sorted(plan.streams))
    if missing := [str(name) for name in names if str(name) not in plan.streams]:
        raise PlanError(f"{folder.plan} has no stream {', '.join(missing)}. Run `pbm tune {' '.join(missing)}` first.")
    task = _Task(plan.streams, laboratory, seed)
    done = over_streams(folder.history, names, task, workers, "Appraising")
    appraisal = _appraisal(folder, laboratory, seed, [d.result for d in done if d.result is not None])
    if appraisal.streams:
        folder.reports.mkdir(exist_ok=True)
        write_appraisal(folder.reports / "appraisal.json", appraisal)
        write_report(folder.reports / "appraisal.html", appraisal)
    typer.echo(appraisal.model_dump_json(indent=2) if json else _told(appraisal, folder.reports))
    report_failures(done)
    if check and not _kept(appraisal):
        raise typer.Exit(1)


class _Task:
    """Appraise one stream; picklable."""

    def __init__(self, plans: "dict[str, StreamPlan]", lab: "Lab", seed: int) -> None:
        self.plans, self.lab, self.seed = plans, lab, seed

    def __call__(self, history: "StreamHistory") -> "StreamAppraisal":
        from pbm.stages.appraise import appraise_stream

        return appraise_stream(history, self.plans[str(history.name)], self.lab, self.seed)


def _appraisal(folder: LabFolder, lab: "Lab", seed: int, streams: "list[StreamAppraisal]") -> "Appraisal":
    from pbm import __version__
    from pbm.io.history import history_mark
    from pbm.io.lab_file import lab_fingerprint
    from pbm.io.plan_file import plan_fingerprint
    from pbm.records.appraisal import Appraisal

    return Appraisal(
        made_by=f"pbm {__version__}",
        laboratory=lab.laboratory.name,
        seed=seed,
        history_sha256=history_mark(folder.history).sha256,
        plan_sha256=plan_fingerprint(folder.plan),
        lab_sha256=lab_fingerprint(folder.lab),
        streams=tuple(streams),
    )


def _kept(appraisal: "Appraisal") -> bool:
    return all(m.false_alarms.kept for s in appraisal.streams for m in s.monitors)


def _told(appraisal: "Appraisal", reports: Path) -> str:
    from pbm.commands.tables import table

    rows = [_row(s) for s in appraisal.streams if s.monitors]
    without = [f"{s.stream}: {s.verdict}: {s.reason}" for s in appraisal.streams if not s.monitors]
    explained = (
        "Unreliable results expected from one error until it is found, at the size where that is worst: the controls alone ->\n"
        "with the monitor; and those of them released before the last accepted control event. They are model figures that\n"
        "depend on TEa, analytic SD and the history given. The monitor supplements control materials and never replaces\n"
        "them; limits and actions are the laboratory director's decision under local regulation."
    )
    head = ["stream", "verdict", "unreliable results", "of these final", "held-out alarms"]
    parts = [table(head, rows)] * bool(rows) + ["\n".join(without)] * bool(without)
    return "\n\n".join([*parts, explained, f"Report: {reports / 'appraisal.html'}"])


def _row(stream: "StreamAppraisal") -> list[str]:
    judged = stream.monitors[0]
    alarms = judged.false_alarms
    kept = "kept" if alarms.kept else "NOT KEPT"
    return [
        stream.stream,
        stream.verdict,
        _pair(judged.worst_unreliable),
        _pair(judged.worst_final),
        f"{alarms.episodes} in {alarms.days} days, budget {alarms.allowed:.1f}: {kept}",
    ]


def _pair(worst: "WorstCase") -> str:
    fewer = 1 - worst.with_monitor.value / worst.alone.value if worst.alone.value > 0 else 0.0
    return f"{worst.alone.value:.3g} -> {worst.with_monitor.value:.3g} ({fewer:.0%} fewer)"
