"""`pbm note KIND`: a laboratory event noted by a person; a running watch takes it up at once, and otherwise the next one does."""

from typing import Annotated

import typer

from pbm.commands.folder import LabFolder, LabOption

KindArgument = Annotated[
    str,
    typer.Argument(
        metavar="KIND",
        help='calibration, "reagent lot", maintenance, "control accepted", "control rejected", restart, "keep the old centre" or note; '
        'words may be joined by "-".',
        show_default=False,
    ),
]
AnalyserOption = Annotated[
    str, typer.Option("--analyser", metavar="NAME", help="What it is about.", show_default="the only one")
]
AnalyteOption = Annotated[
    str,
    typer.Option("--analyte", metavar="NAME", help="The only test it is about.", show_default="all of the analyser"),
]
DetailOption = Annotated[
    str, typer.Option("--detail", metavar="TEXT", help="The lot, the control's value, or a few words. No patient data.")
]
AtOption = Annotated[
    str,
    typer.Option(
        "--at",
        metavar="TIME",
        help="When it happened, by the laboratory's clocks: 10:30, or a date and time.",
        show_default="now",
    ),
]
ByOption = Annotated[str, typer.Option("--by", metavar="NAME", help="Who notes it.", show_default="the user")]


def note(
    kind: KindArgument,
    lab: LabOption = None,
    analyser: AnalyserOption = "",
    analyte: AnalyteOption = "",
    detail: DetailOption = "",
    at: AtOption = "",
    by: ByOption = "",
) -> None:
    """Note a laboratory event: a calibration, a reagent lot, controls, maintenance, or that a monitor is to begin afresh.

    What it does to monitors says [events] of lab.toml. It takes effect with the first result measured at its time or later. "keep the old
    centre" undoes what the last event let a monitor learn.

    Example:  pbm note reagent-lot --analyser line-2 --analyte sodium --detail "lot 4711"
    """
    from pbm.commands.note_work import keep_note

    typer.echo(keep_note(LabFolder.find(lab), kind, analyser, analyte, detail, at, by))
