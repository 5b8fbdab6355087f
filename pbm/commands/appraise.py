"""`pbm appraise [STREAM...]`: judge plan.toml on held-out days; writes reports/appraisal.json and appraisal.html."""

from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption, SeedOption, WorkersOption
from pbm.commands.tune import StreamsArgument


class PeersChoice(StrEnum):
    """Which other monitors are tried."""

    NONE = "none"
    QUICK = "quick"
    ALL = "all"


CheckOption = Annotated[
    bool,
    typer.Option(
        "--check", help="Leave with 1 if a limit was not kept on held-out days or a monitor saves nothing that counts."
    ),
]
PeersOption = Annotated[
    PeersChoice,
    typer.Option(
        "--peers", help="Other monitors to try within the same alarm budget; all of them take a minute a stream."
    ),
]
VerifyOption = Annotated[
    Path | None,
    typer.Option(
        "--verify",
        metavar="FILE",
        help="Compute an appraisal.json anew and compare; leave with 1 if it differs. Writes nothing.",
    ),
]


def appraise(
    streams: StreamsArgument = None,
    lab: LabOption = None,
    workers: WorkersOption = None,
    seed: SeedOption = 1,
    peers: PeersOption = PeersChoice.QUICK,
    check: CheckOption = False,
    verify: VerifyOption = None,
    json: JsonOption = False,
) -> None:
    """Judge the plan on held-out days: what the controls alone catch, what the monitor adds, and how many alarms to expect.

    With --verify the streams, the seed and the other monitors are those of the file.

    Example:  pbm appraise
    """
    from pbm.commands.appraise_work import Asked, appraise_folder, verify_file

    folder = LabFolder.find(lab)
    if verify is not None:
        verify_file(folder, verify, workers)
    else:
        appraise_folder(folder, Asked(streams, seed, peers.value), workers, check=check, json=json)
