"""The laboratory's folder: where `lab.toml` is, and the places of what the commands read and write beside it."""

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated

import typer

from pbm.errors import InputError, PlanError

LabOption = Annotated[
    Path | None,
    typer.Option("--lab", metavar="FOLDER", help="Folder that holds lab.toml.", show_default="the current folder"),
]
JsonOption = Annotated[bool, typer.Option("--json", help="Print JSON for a program instead of text for a person.")]
WorkersOption = Annotated[
    int | None, typer.Option("--workers", min=1, help="Processes to use.", show_default="one per processor")
]
ClusterOption = Annotated[
    str | None,
    typer.Option(
        "--cluster", metavar="ADDRESS", help="Scheduler of a dask cluster whose workers do the work: tcp://HOST:PORT."
    ),
]
SeedOption = Annotated[int, typer.Option("--seed", min=0, help="Master seed; the same seed gives the same figures.")]


@dataclass(frozen=True)
class LabFolder:
    """The files a laboratory works with."""

    root: Path

    @classmethod
    def find(cls, given: Path | None) -> "LabFolder":
        """The folder given, or the current one; it must hold `lab.toml`.

        Raises
        ------
        InputError
            If there is no `lab.toml`.
        """
        root = given or Path()
        if not (root / "lab.toml").is_file():
            raise InputError(
                f"There is no lab.toml in {root.absolute()}. Go to the folder that holds it, or name that folder with --lab FOLDER; "
                "`pbm demo` makes an example."
            )
        return cls(root)

    @property
    def lab(self) -> Path:
        """`lab.toml`."""
        return self.root / "lab.toml"

    @property
    def history(self) -> Path:
        """Parquet files, one folder per stream."""
        return self.root / "history"

    @property
    def plan(self) -> Path:
        """`plan.toml`."""
        return self.root / "plan.toml"

    def existing_plan(self) -> Path:
        """`plan.toml`, which `pbm tune` must have made.

        Raises
        ------
        PlanError
            If there is none.
        """
        if not self.plan.is_file():
            raise PlanError(
                f"There is no plan.toml in {self.root.absolute()}. Run `pbm tune` first: it chooses the monitors."
            )
        return self.plan

    @property
    def reports(self) -> Path:
        """Reports as HTML and JSON."""
        return self.root / "reports"

    @property
    def tuning(self) -> Path:
        """Why the monitors of plan.toml are what they are."""
        return self.reports / "tuning.json"

    @property
    def finished(self) -> Path:
        """Streams that `pbm tune` has finished, until all are."""
        return self.root / ".pbm-tune"

    @property
    def store(self) -> Path:
        """What `pbm watch` writes."""
        return self.root / "watch.sqlite"

    @property
    def bench(self) -> Path:
        """What people enter while a watch runs."""
        return self.root / "bench.sqlite"

    @property
    def patient_key(self) -> Path:
        """The key of the tokens for patients on the live feed."""
        return self.root / "watch.key"
