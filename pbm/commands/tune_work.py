"""The work of `pbm tune`: every stream in a worker, the fleet budget shared, plan.toml and its reasons written."""

from datetime import UTC, datetime
from functools import partial

import typer

from pbm import __version__
from pbm.commands.fleet import share_fleet_budget, told_shares
from pbm.commands.folder import LabFolder
from pbm.commands.lab import read_checked_lab
from pbm.commands.resume import FinishedStreams
from pbm.commands.rhythms import with_rhythms
from pbm.commands.tune_text import told
from pbm.commands.versions import versions
from pbm.commands.work import Workers, chosen_streams, over_streams, report_failures
from pbm.io.history import history_mark
from pbm.io.lab_file import lab_fingerprint
from pbm.io.plan_file import plan_fingerprint, read_plan, write_plan
from pbm.io.tuning_file import read_tuning, write_tuning
from pbm.methods.candidates import QUICK_GRID, WHOLE_GRID
from pbm.records.plan import Made, Plan, StreamPlan
from pbm.records.tuning import StreamTuning, Tuned, Tuning
from pbm.stages.by_hand import ByHand
from pbm.stages.tune import tune_stream


def tune_folder(
    folder: LabFolder,
    streams: list[str] | None,
    by_hand: ByHand,
    *,
    workers: Workers,
    seed: int,
    keep: bool,
    quick: bool,
    json: bool,
) -> None:
    """Tune the streams of a laboratory's folder; the options are those of the command."""
    laboratory, lab_sha256 = read_checked_lab(folder.lab), lab_fingerprint(folder.lab)
    names = chosen_streams(folder.history, streams)
    kept = read_plan(folder.existing_plan()).streams if keep else None
    grid = QUICK_GRID if quick else WHOLE_GRID
    task = partial(tune_stream, lab=laboratory, seed=seed, by_hand=by_hand, kept=kept, grid=grid)
    decided_by = _decided_by(folder, lab_sha256, by_hand, seed=seed, keep=keep, quick=quick)
    finished = FinishedStreams(folder.finished, Tuned, decided_by)
    done = over_streams(folder.history, names, task, workers, "Tuning", finished)
    found = {str(d.name): d.result for d in done if d.result is not None}
    tuned = {name: one.plan for name, one in found.items()}
    shares = {} if keep else share_fleet_budget(folder, laboratory, seed, workers, tuned)
    if tuned:
        plan = _merged(folder, lab_sha256, tuned, seed, keep_others=bool(streams))
        plan = with_rhythms(plan, folder.history, laboratory, tuned)
        write_plan(folder.plan, plan)
        if not keep:
            reasons = {name: one.reasons for name, one in found.items() if one.reasons is not None}
            _write_reasons(folder, reasons, plan, keep_others=bool(streams))
        text = told(folder.plan, {name: plan.streams[name] for name in tuned}) + told_shares(laboratory, shares)
        typer.echo(plan.model_dump_json(indent=2) if json else text)
    report_failures(done)
    finished.remove(names)


def _decided_by(
    folder: LabFolder, lab_sha256: str, by_hand: ByHand, *, seed: int, keep: bool, quick: bool
) -> dict[str, str]:
    """What decides a stream's monitors beside its history; all of it, or an interrupted tune would go on with what is no longer so."""
    return {
        "lab.toml": lab_sha256,
        "seed": str(seed),
        "by hand": repr(by_hand),
        "kept plan": plan_fingerprint(folder.plan) if keep else "",
        "quick": str(quick),
    }


def _merged(folder: LabFolder, lab_sha256: str, tuned: dict[str, StreamPlan], seed: int, *, keep_others: bool) -> Plan:
    """The new plan; where only some streams were tuned, the others of an existing plan are kept."""
    before = read_plan(folder.plan) if keep_others and folder.plan.exists() else None
    made = Made(
        by=f"pbm {__version__}",
        at=datetime.now(UTC).replace(microsecond=0),
        history=history_mark(folder.history),
        seed=seed,
        lab_sha256=lab_sha256,
        versions=versions(),
    )
    streams = dict(sorted({**(before.streams if before else {}), **tuned}.items()))
    return Plan(made=made, streams=streams, analysers=before.analysers if before else {})


def _write_reasons(folder: LabFolder, reasons: dict[str, StreamTuning], plan: Plan, *, keep_others: bool) -> None:
    """Beside the plan: why; where only some streams were tuned, the reasons of the others are kept."""
    before = read_tuning(folder.tuning) if keep_others else None
    others = {} if before is None else before.streams
    folder.reports.mkdir(exist_ok=True)
    write_tuning(folder.tuning, Tuning(at=plan.made.at, streams=dict(sorted({**others, **reasons}.items()))))
