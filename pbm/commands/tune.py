"""`pbm tune [STREAM...]`: choose monitors on the history and write plan.toml."""

from typing import Annotated

import typer

from pbm.commands.folder import ClusterOption, JsonOption, LabFolder, LabOption, SeedOption, WorkersOption

StreamsArgument = Annotated[
    list[str] | None, typer.Argument(metavar="[STREAM...]", help="Streams such as sodium@line-2.", show_default="all")
]


AdmitOption = Annotated[
    str | None,
    typer.Option("--admit", metavar="LOW:HIGH", help="Truncation limits; leave a side open with LOW: or :HIGH."),
]
WinsorizeOption = Annotated[bool, typer.Option("--winsorize", help="Set results beyond --admit to the limit.")]
TransformOption = Annotated[str | None, typer.Option("--transform", metavar="NAME", help="none, log or boxcox.")]
StatisticOption = Annotated[
    str | None,
    typer.Option(
        "--statistic", metavar="NAME", help="ewma, mean, median, cusum, share, batch; ewsd or sd for imprecision."
    ),
]
WeightOption = Annotated[float | None, typer.Option("--weight", help="Weight of the newest result (ewma, ewsd).")]
WindowOption = Annotated[
    int | None, typer.Option("--window", help="Number of results (mean, median, share, sd; batch).")
]
ReferenceOption = Annotated[
    float | None, typer.Option("--reference", help="Reference of a cusum, in SD of one result.")
]
QuickOption = Annotated[bool, typer.Option("--quick", help="Try about a quarter of the choices.")]
MixOption = Annotated[bool | None, typer.Option("--mix/--no-mix", help="Adjust for patient mix, or do not.")]
KeepOption = Annotated[bool, typer.Option("--keep", help="Keep the monitors of plan.toml and learn their limits anew.")]


def tune(
    streams: StreamsArgument = None,
    lab: LabOption = None,
    workers: WorkersOption = None,
    cluster: ClusterOption = None,
    seed: SeedOption = 1,
    admit: AdmitOption = None,
    winsorize: WinsorizeOption = False,
    transform: TransformOption = None,
    statistic: StatisticOption = None,
    weight: WeightOption = None,
    window: WindowOption = None,
    reference: ReferenceOption = None,
    mix: MixOption = None,
    keep: KeepOption = False,
    quick: QuickOption = False,
    json: JsonOption = False,
) -> None:
    """Choose each stream's monitor by simulating errors on its history, and write plan.toml.

    The first two thirds of the days train, the last third confirms. A stream on which a monitor does not pay is said so, with the reason.

    What is set by hand is not searched for. With --keep a plan, also an edited one, gets new limits without a new search. Why the monitors
    are what they are goes into reports/tuning.json, and with the next appraisal into the report.

    Example:  pbm tune sodium@line-1 --admit 125:155 --statistic ewma --weight 0.05
    """
    from pbm.commands.tune_by_hand import read_by_hand
    from pbm.commands.tune_work import tune_folder
    from pbm.commands.work import chosen_workers

    parameters = {"weight": weight, "window": window, "reference": reference}
    by_hand = read_by_hand(admit, winsorize, transform, statistic, parameters, mix)
    crew = chosen_workers(workers, cluster)
    tune_folder(LabFolder.find(lab), streams, by_hand, workers=crew, seed=seed, keep=keep, quick=quick, json=json)
