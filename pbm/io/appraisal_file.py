"""`reports/appraisal.json`: an appraisal as JSON, keys in the record's order, floats exact, written whole or not at all."""

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

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
    """Write `appraisal.json`, a stream a line; the same appraisal gives the same bytes, and `read_appraisal` gives back an equal one."""
    streams = ",\n".join(one.model_dump_json() for one in appraisal.streams)
    head = appraisal.model_dump_json(exclude={"streams"}).removesuffix("}")
    replace_file(path, f'{head},"streams":[\n{streams}\n]}}\n'.encode())


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


def differences(one: Appraisal, other: Appraisal) -> list[str]:
    """Every entry in which two appraisals differ, with both values; streams and faults are told by their names."""
    return list(_differing("", one.model_dump(mode="json"), other.model_dump(mode="json")))


def _differing(place: str, one: Any, other: Any) -> Iterator[str]:
    if isinstance(one, dict) and isinstance(other, dict):
        for key in dict.fromkeys([*one, *other]):
            yield from _differing(f"{place}.{key}" if place else str(key), one.get(key), other.get(key))
    elif isinstance(one, list) and isinstance(other, list) and len(one) == len(other):
        for number, (left, right) in enumerate(zip(one, other, strict=True), 1):
            yield from _differing(f"{place}[{_named(left, number)}]", left, right)
    elif one != other:
        yield f"{place}: {_short(one)} -> {_short(other)}"


def _named(entry: Any, number: int) -> str:
    """What an entry of a list is called: a stream or a fault by its name, others by their place from 1."""
    told = (
        (entry.get(key) for key in ("stream", "label", "name", "when", "controls")) if isinstance(entry, dict) else ()
    )
    return next((str(name) for name in told if name), str(number))


def _short(value: Any) -> str:
    if isinstance(value, dict | list):
        return f"{len(value)} entries"
    return json.dumps(value, ensure_ascii=False)


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
