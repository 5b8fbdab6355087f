"""`reports/tuning.json`: why the monitors of `plan.toml` are what they are; written whole or not at all."""

from pathlib import Path

from pydantic import ValidationError

from pbm.errors import InputError
from pbm.io.atomic import replace_file
from pbm.records.tuning import Tuning


def write_tuning(path: Path, tuning: Tuning) -> None:
    """Write `tuning.json`, one line for each stream."""
    streams = ",\n".join(f'"{name}": {one.model_dump_json()}' for name, one in tuning.streams.items())
    head = tuning.model_dump_json(exclude={"streams"}).removesuffix("}")
    replace_file(path, f'{head},"streams":{{\n{streams}\n}}}}\n'.encode())


def read_tuning(path: Path) -> Tuning | None:
    """Read `tuning.json`; None if there is none.

    Raises
    ------
    InputError
        If it does not hold what this version of pbm writes.
    """
    if not path.exists():
        return None
    try:
        return Tuning.model_validate_json(path.read_bytes())
    except ValidationError:
        raise InputError(
            f"{path} does not hold the reasons of a plan as this version of pbm writes them. Run `pbm tune` again, or move the file away."
        ) from None
