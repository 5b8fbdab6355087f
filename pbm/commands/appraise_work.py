"""The work of `pbm appraise`: every stream in a worker, the appraisal put together, written, checked, or compared with one of before."""

from dataclasses import dataclass
from functools import partial
from pathlib import Path

import typer

from pbm import __version__
from pbm.commands.appraise_text import told, told_differences
from pbm.commands.folder import LabFolder
from pbm.commands.job import Done
from pbm.commands.lab import read_checked_lab
from pbm.commands.versions import versions
from pbm.commands.work import chosen_streams, over_streams, report_failures
from pbm.errors import PlanError
from pbm.io.appraisal_file import read_appraisal, write_appraisal
from pbm.io.history import history_mark
from pbm.io.lab_file import lab_fingerprint
from pbm.io.plan_file import plan_fingerprint, read_plan
from pbm.io.report.page import write_report
from pbm.io.tuning_file import read_tuning
from pbm.methods.part_of_week import PARTS
from pbm.records.appraisal import Appraisal, PeersTried, StreamAppraisal
from pbm.records.laboratory import Lab
from pbm.records.plan import StreamPlan
from pbm.records.stream import StreamHistory
from pbm.stages.appraise import appraise_stream, bench_of


@dataclass(frozen=True)
class Asked:
    """What decides an appraisal beside the files: the streams (all of the plan, if none are named), the seed, the other monitors."""

    streams: list[str] | None
    seed: int
    peers: PeersTried


def appraise_folder(folder: LabFolder, asked: Asked, workers: int | None, *, check: bool, json: bool) -> None:
    """Appraise, write both files and tell."""
    tuning = read_tuning(folder.tuning)
    appraisal, done = _appraised(folder, asked, workers)
    if appraisal.streams:
        folder.reports.mkdir(exist_ok=True)
        write_appraisal(folder.reports / "appraisal.json", appraisal)
        write_report(folder.reports / "appraisal.html", appraisal, tuning)
    typer.echo(appraisal.model_dump_json(indent=2) if json else told(appraisal, folder.reports))
    report_failures(done)
    if check:
        _check(appraisal)


def verify_file(folder: LabFolder, path: Path, workers: int | None) -> None:
    """Compute an appraisal anew, as it was asked for, and tell what differs; leave with 1 if anything does."""
    given = read_appraisal(path)
    asked = Asked([one.stream for one in given.streams], given.seed, given.peers_tried)
    now, done = _appraised(folder, asked, workers)
    report_failures(done)
    same, text = told_differences(path, given, now)
    typer.echo(text)
    if not same:
        raise typer.Exit(1)


def _appraised(folder: LabFolder, asked: Asked, workers: int | None) -> tuple[Appraisal, list[Done[StreamAppraisal]]]:
    laboratory, plan = read_checked_lab(folder.lab), read_plan(folder.existing_plan())
    names = chosen_streams(folder.history, asked.streams or sorted(plan.streams))
    if missing := [str(name) for name in names if str(name) not in plan.streams]:
        raise PlanError(f"{folder.plan} has no stream {', '.join(missing)}. Run `pbm tune {' '.join(missing)}` first.")
    task = partial(_appraise, plans=plan.streams, lab=laboratory, seed=asked.seed, peers=asked.peers)
    done = over_streams(folder.history, names, task, workers, "Appraising")
    return _together(folder, laboratory, asked, [one.result for one in done if one.result is not None]), done


def _appraise(
    history: StreamHistory, plans: dict[str, StreamPlan], lab: Lab, seed: int, peers: PeersTried
) -> StreamAppraisal:
    return appraise_stream(history, plans[str(history.name)], lab, seed, peers)


def _together(folder: LabFolder, lab: Lab, asked: Asked, streams: list[StreamAppraisal]) -> Appraisal:
    return Appraisal(
        made_by=f"pbm {__version__}",
        versions=versions(),
        laboratory=lab.laboratory.name,
        time_zone=lab.laboratory.timezone,
        seed=asked.seed,
        peers_tried=asked.peers,
        history_sha256=history_mark(folder.history).sha256,
        plan_sha256=plan_fingerprint(folder.plan),
        lab_sha256=lab_fingerprint(folder.lab),
        onset_times=PARTS,
        bench=bench_of(streams),
        streams=tuple(streams),
    )


def _check(appraisal: Appraisal) -> None:
    found = [(one.stream, what) for one in appraisal.streams if one.judged for what in one.judged.objections]
    for stream, what in found:
        typer.echo(f"pbm: {stream}: {what}", err=True)
    if found:
        raise typer.Exit(1)
