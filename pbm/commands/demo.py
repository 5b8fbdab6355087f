"""`pbm demo [FOLDER]`: the whole job on the invented laboratory, ending with the name of the report."""

from pathlib import Path
from typing import Annotated

import typer

from pbm.commands.folder import SeedOption, WorkersOption

FolderArgument = Annotated[Path, typer.Argument(metavar="[FOLDER]", help="A new folder for the invented laboratory.")]


def demo(folder: FolderArgument = Path("tern-bay"), workers: WorkersOption = None, seed: SeedOption = 1) -> None:
    """Run the whole job on the invented Tern Bay District Laboratory: intake, tune, appraise, and two live days with an error in them.

    Example:  pbm demo tern-bay
    """
    from pbm.commands.appraise import appraise
    from pbm.commands.intake import intake
    from pbm.commands.tune import tune
    from pbm.commands.watch import watch
    from pbm.errors import InputError
    from synthetic_streams import write_laboratory

    if folder.exists() and not (folder.is_dir() and not any(folder.iterdir())):
        raise InputError(
            f"{folder} is there already, and the demo does not write among other files. Name a new folder: pbm demo FOLDER."
        )
    _step(f"1  An invented laboratory: history, controls, two live days with an error of known onset, in {folder}")
    write_laboratory(folder, seed=seed)
    _step("2  pbm intake: the history as the information system exports it")
    intake([folder / "extract" / "export.csv"], lab=folder)
    _step("3  pbm tune --quick: choose monitors on two thirds of the days")
    tune(lab=folder, workers=workers, seed=seed, quick=True)
    _step("4  pbm appraise: prove them on the last third, beside the control schedule")
    appraise(lab=folder, workers=workers, seed=seed)
    _step("5  pbm watch: the two live days")
    watch(from_=[str(folder / "live.csv")], lab=folder, once=True, events=folder / "live-events.csv")
    typer.echo(f"\nWhat was wrong in those two days: {folder / 'faults.json'}")
    typer.echo(f"The report to read: {folder / 'reports' / 'appraisal.html'}")


def _step(title: str) -> None:
    typer.echo(f"\n== {title}\n")
