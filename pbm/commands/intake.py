"""`pbm intake FILE...`: bring extracts into history/ and say what was taken and what was left out."""

from pathlib import Path
from typing import Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption

FilesArgument = Annotated[
    list[Path], typer.Argument(metavar="FILE", help="Extracts: CSV, CSV.gz or Parquet.", show_default=False)
]


def intake(files: FilesArgument, lab: LabOption = None, json: JsonOption = False) -> None:
    """Take results from extracts into history/, and print the account: rows read = taken + left out, by reason.

    lab.toml says which column holds what. A row is left out only for a reason, kept with its line in history/left-out.parquet. An extract
    that was taken before is not taken again, and rows that extracts share are taken once. If anything is wrong, history/ stays as it was.

    Example:  pbm intake export-2030.csv.gz export-2031.csv
    """
    from pbm.commands.intake_account import as_json, in_words
    from pbm.commands.intake_work import take
    from pbm.commands.lab import read_checked_lab
    from pbm.io.lab_file import lab_fingerprint

    folder = LabFolder.find(lab)
    laboratory = read_checked_lab(folder.lab)
    taken = take(files, folder.history, laboratory, lab_fingerprint(folder.lab))
    typer.echo(as_json(taken) if json else in_words(taken, folder.history, laboratory.laboratory.zone))
