"""`reports/appraisal.json`: an appraisal as JSON, keys in the record's order, floats exact, written whole or not at all."""

from pathlib import Path

from pydantic import BaseModel, ValidationError

from pbm.errors import InputError
from pbm.io.atomic import replace_file
from pbm.io.mistakes import dotted, written_bytes
from pbm.records.appraisal import Appraisal

_KNOWN_VERSION: int = Appraisal.model_fields["version"].default
_MOST_TOLD = 5


class _Version(BaseModel):
    version: int


def write_appraisal(path: Path, appraisal: Appraisal) -> None:
    """Write `appraisal.json`; the same appraisal gives the same bytes, and `read_appraisal` gives back an equal one."""
    replace_file(path, f"{appraisal.model_dump_json(indent=1)}\n".encode())


def read_appraisal(path: Path) -> Appraisal:
    """Read `appraisal.json`.

    Raises
    ------
    InputError
        If it is missing, is not JSON, was written by a newer version, or does not hold an appraisal; the text says where.
    """
    content = written_bytes(path, InputError)
    try:
        version = _Version.model_validate_json(content).version
        if version > _KNOWN_VERSION:
            raise InputError(_too_new(path, version))
        # Strict: text never stands for a number, nor true for 1.
        return Appraisal.model_validate_json(content, strict=True)
    except ValidationError as error:
        raise InputError(_told(path, error)) from None


def _too_new(path: Path, version: int) -> str:
    return (
        f"{path} is of version {version}, written by a newer pbm; this one reads version {_KNOWN_VERSION}. "
        "Read it with that pbm, or make it again here with `pbm appraise`."
    )


def _told(path: Path, error: ValidationError) -> str:
    mistakes = [_mistake(one["loc"], one["msg"]) for one in error.errors(include_url=False, include_input=False)]
    if len(mistakes) > _MOST_TOLD:
        mistakes[_MOST_TOLD:] = [f"and {len(mistakes) - _MOST_TOLD} more"]
    counted = " (entries of a list are counted from 1)" if "[" in "".join(mistakes) else ""
    return f"{path} does not hold an appraisal{counted}: {'; '.join(mistakes)}. Make it again with `pbm appraise`."


def _mistake(location: tuple[int | str, ...], message: str) -> str:
    return f"{dotted(location)}: {message}" if location else message
