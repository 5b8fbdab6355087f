"""`pbm tune [STREAM...]`: choose monitors on the history and write plan.toml."""

from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption, SeedOption, WorkersOption

if TYPE_CHECKING:
    from pbm.records.plan import Admit, MonitorPlan, Plan, StreamPlan
    from pbm.stages.by_hand import ByHand

StreamsArgument = Annotated[
    list[str] | None, typer.Argument(metavar="[STREAM...]", help="Streams such as sodium@line-2.", show_default="all")
]


AdmitOption = Annotated[
    str | None,
    typer.Option("--admit", metavar="LOW:HIGH", help="Truncation limits; leave a side open with LOW: or :HIGH."),
]
WinsorizeOption = Annotated[bool, typer.Option("--winsorize", help="Set results beyond --admit to the limit.")]
TransformOption = Annotated[str | None, typer.Option("--transform", metavar="NAME", help="none, log or boxcox.")]
StatisticOption = Annotated[str | None, typer.Option("--statistic", metavar="NAME", help="ewma, mean or median.")]
WeightOption = Annotated[float | None, typer.Option("--weight", help="Weight of the newest result, of an EWMA.")]
WindowOption = Annotated[int | None, typer.Option("--window", help="Number of results, of a moving mean or median.")]
MixOption = Annotated[bool | None, typer.Option("--mix/--no-mix", help="Adjust for patient mix, or do not.")]
KeepOption = Annotated[bool, typer.Option("--keep", help="Keep the monitors of plan.toml and learn their limits anew.")]


def tune(
    streams: StreamsArgument = None,
    lab: LabOption = None,
    workers: WorkersOption = None,
    seed: SeedOption = 1,
    admit: AdmitOption = None,
    winsorize: WinsorizeOption = False,
    transform: TransformOption = None,
    statistic: StatisticOption = None,
    weight: WeightOption = None,
    window: WindowOption = None,
    mix: MixOption = None,
    keep: KeepOption = False,
    json: JsonOption = False,
) -> None:
    """Choose each stream's monitor by simulating errors on its history, and write plan.toml.

    The first two thirds of the days train, the last third confirms. A stream on which a monitor does not pay is said so, with the reason.

    What is set by hand is not searched for. With --keep a plan, also an edited one, gets new limits without a new search.

    Example:  pbm tune sodium@line-1 --admit 125:155 --statistic ewma --weight 0.05
    """
    from pbm.commands.fleet import share_fleet_budget, told_shares
    from pbm.commands.lab import read_checked_lab
    from pbm.commands.work import chosen_streams, over_streams, report_failures
    from pbm.io.plan_file import read_plan, write_plan
    from pbm.stages.tune import tune_stream

    folder = LabFolder.find(lab)
    laboratory = read_checked_lab(folder.lab)
    names = chosen_streams(folder.history, streams)
    by_hand = _by_hand(admit, winsorize, transform, statistic, weight if window is None else window, mix)
    kept = read_plan(folder.existing_plan()).streams if keep else None
    task = partial(tune_stream, lab=laboratory, seed=seed, by_hand=by_hand, kept=kept)
    done = over_streams(folder.history, names, task, workers, "Tuning")
    tuned = {str(d.name): d.result for d in done if d.result is not None}
    shares = {} if keep else share_fleet_budget(folder, laboratory, seed, workers, tuned)
    if tuned:
        plan = _merged(folder, tuned, seed, keep_others=bool(streams))
        write_plan(folder.plan, plan)
        told = {name: plan.streams[name] for name in tuned}
        typer.echo(
            plan.model_dump_json(indent=2) if json else _told(folder.plan, told) + told_shares(laboratory, shares)
        )
    report_failures(done)


def _by_hand(
    admit: str | None,
    winsorize: bool,
    transform: str | None,
    statistic: str | None,
    parameter: float | None,
    mix: bool | None,
) -> "ByHand":
    from pbm.errors import InputError
    from pbm.stages.by_hand import ByHand

    if transform not in (None, "none", "log", "boxcox"):
        raise InputError(f'--transform is none, log or boxcox, not "{transform}".')
    if winsorize and admit is None:
        raise InputError("--winsorize says what happens beyond --admit LOW:HIGH, which is not given.")
    return ByHand(_admit(admit, winsorize), transform, statistic, parameter, mix)


def _admit(text: str | None, winsorize: bool) -> "Admit | None":
    from pydantic import ValidationError

    from pbm.errors import InputError
    from pbm.records.plan import Admit

    if text is None:
        return None
    try:
        low, high = (float(end) if end else None for end in text.split(":"))
        return Admit(low=low, high=high, mode="winsorize" if winsorize else "truncate")
    except (ValueError, ValidationError):
        raise InputError(f'--admit takes LOW:HIGH such as 125:155, with LOW below HIGH; found "{text}".') from None


def _merged(folder: LabFolder, tuned: "dict[str, StreamPlan]", seed: int, *, keep_others: bool) -> "Plan":
    """The new plan; where only some streams were tuned, the others of an existing plan are kept."""
    from datetime import UTC, datetime

    from pbm import __version__
    from pbm.commands.versions import versions
    from pbm.io.history import history_mark
    from pbm.io.lab_file import lab_fingerprint
    from pbm.io.plan_file import read_plan
    from pbm.records.plan import Made, Plan

    before = read_plan(folder.plan).streams if keep_others and folder.plan.exists() else {}
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
