"""Files that people write (TOML): read as a whole, and every mistake in them told at once, by key, in the reader's words."""

import difflib
import json
import re
import tomllib
from collections.abc import Callable, Iterable
from datetime import date, datetime, time
from pathlib import Path
from typing import Any, Literal, TypeVar, get_args, get_origin

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from pbm.errors import InputError
from pbm.records.quantities import Written

W = TypeVar("W", bound=Written)
Location = tuple[int | str, ...]
_BARE_KEY = re.compile(r"^[A-Za-z0-9_-]+$")
_PLACE = re.compile(r" \(at (line (?P<line>\d+), column \d+|end of document)\)$")
_PASSWORD = re.compile(r"""(://[^:@"]*:).*(@)|(password=)[^&"]*""")  # in an address
_LONGEST = 80


def read_written(
    path: Path,
    record: type[W],
    failure: type[InputError],
    further: Callable[[dict[str, Any]], Iterable[str]] = lambda data: (),
) -> W:
    """Read a TOML file into the record it describes.

    Parameters
    ----------
    path
        The file.
    record
        What it should hold.
    failure
        The error to raise.
    further
        Rules over the whole file, asked even when parts of it are wrong (a record asks such rules only when its parts are right).

    Raises
    ------
    InputError
        Of class `failure`: the file is missing, is not UTF-8, is not TOML, or holds mistakes; all of them are listed.
    """
    data = _parse(path, written_bytes(path, failure), failure)
    try:
        # As strict JSON: a list may stand for a tuple, but text never stands for a number, nor true for 1.
        return record.model_validate_json(json.dumps(data, default=_as_text), strict=True)
    except ValidationError as error:
        # A rule over a whole table may tell several mistakes, one a line.
        told = (_mistake(record, one) for one in error.errors(include_url=False) if not _echo(one))
        found = [line for text in told for line in text.splitlines()]
    found += [one for one in further(data) if not any(one in known for known in found)]
    raise failure(_listed(path, found))


def written_bytes(path: Path, failure: type[InputError]) -> bytes:
    """The bytes of a file that a person or an earlier command should have written.

    Raises
    ------
    InputError
        Of class `failure`, if it cannot be read.
    """
    try:
        return path.read_bytes()
    except FileNotFoundError:
        raise failure(f"There is no file {path}. Check the name and the folder.") from None
    except OSError as error:
        raise failure(f"{path} cannot be read: {error.strerror}. A readable text file was expected.") from None


def _parse(path: Path, content: bytes, failure: type[InputError]) -> dict[str, Any]:
    if content.startswith(b"\xef\xbb\xbf"):
        raise failure(f"{path} starts with a byte order mark, which TOML does not allow. Save it as UTF-8 without BOM.")
    try:
        text = content.decode("utf-8")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise failure(
            f"{path}, line {line}: byte 0x{content[error.start]:02x} is not UTF-8. Save the file as UTF-8."
        ) from None
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise failure(_syntax(path, text, str(error))) from None
    except RecursionError:
        raise failure(f"{path} nests lists or tables too deeply to be read.") from None


def _syntax(path: Path, text: str, message: str) -> str:
    place = _PLACE.search(message)
    if not place:
        return f"{path} is not TOML: {message}. Correct it and try again."
    what = message[: place.start()]
    if not place["line"]:
        return f"{path}, at its end: {what}. Look at its last lines."
    written = text.replace("\r\n", "\n").split("\n")[int(place["line"]) - 1].strip()
    return f"{path}, {place[1]}: {what}. The line reads: {_short(written)}"


def _listed(path: Path, found: list[str]) -> str:
    counted = " (entries of a list are counted from 1)" if any("[" in line.split(":")[0] for line in found) else ""
    head = f"{path} holds {len(found)} mistake{'s' if len(found) > 1 else ''}{counted}:"
    return "\n".join([head, *(f"  {line}" for line in found)])


def _echo(error: ErrorDetails) -> bool:
    """Whether a list is called too short only because its entries, told one by one, are wrong."""
    return error["type"] == "too_short" and len(error["input"]) >= error.get("ctx", {})["min_length"]


def _mistake(record: type[Written], error: ErrorDetails) -> str:
    location, kind = error["loc"], error["type"]
    key = dotted(location)
    if kind == "extra_forbidden":
        return f"{key}: unknown key (found {_shown(error['input'])}); {_nearest(record, location)}"
    if kind == "missing":
        return f"{key}: missing; expected {_described(_annotation(record, location))}"
    if kind == "value_error":
        rule = str(error.get("ctx", {}).get("error", error["msg"]))
        return f"{key}: found {_shown(error['input'])}; {rule}" if location else rule
    return f"{key or 'the file'}: found {_shown(error['input'])}; expected {_expected(error)}"


def dotted(location: Iterable[int | str]) -> str:
    """A place in a TOML file as a person would write it: `analytes.sodium.controls.levels[1].sd`, lists counted from 1."""
    parts: list[str] = []
    for part in location:
        if isinstance(part, int):
            parts[-1] = f"{parts[-1]}[{part + 1}]"
        else:
            parts.append(part if _BARE_KEY.match(part) else json.dumps(part, ensure_ascii=False))
    return ".".join(parts)


_EXPECTED = {
    "string_type": "text in quotes",
    "float_type": "a number",
    "int_type": "a whole number",
    "int_from_float": "a whole number",
    "bool_type": "true or false",
    "finite_number": "a finite number",
    "greater_than": "a number above {gt:g}",
    "greater_than_equal": "a number of at least {ge:g}",
    "less_than": "a number below {lt:g}",
    "less_than_equal": "a number of at most {le:g}",
    "string_too_short": "text of at least {min_length} character",
    "string_too_long": "text of at most {max_length} character",
    "too_short": "at least {min_length} entry",
    "too_long": "at most {max_length} entries",
    "tuple_type": "a list [ ... ]",
    "dict_type": "a table",
    "model_type": "a table",
}


def _expected(error: ErrorDetails) -> str:
    kind, context = error["type"], error.get("ctx", {})
    if kind == "literal_error":
        return "one of " + str(context["expected"]).replace("'", '"').replace(" or ", ", ")
    if kind.startswith("datetime"):
        return "a date and time such as 2031-03-02T07:14:05Z"
    if kind in _EXPECTED:
        return _EXPECTED[kind].format(**context)
    return error["msg"].removeprefix("Input should be ")


def _annotation(record: type[Written], location: Location) -> Any:
    """The type declared at a place of a record; None where there is none."""
    kind: Any = record
    for part in location:
        kind = _inside(_plain(kind), part)
    return _plain(kind)


def _inside(kind: Any, part: int | str) -> Any:
    if isinstance(kind, type) and issubclass(kind, Written):
        field = kind.model_fields.get(str(part))
        return field.annotation if field else None
    return get_args(kind)[-1 if get_origin(kind) is dict else 0] if get_args(kind) else None


def _plain(kind: Any) -> Any:
    """A type without `| None`."""
    choices = [one for one in get_args(kind) if one is not type(None)]
    return choices[0] if type(None) in get_args(kind) else kind


def _described(kind: Any) -> str:
    if isinstance(kind, type) and issubclass(kind, Written):
        needed = [name for name, field in kind.model_fields.items() if field.is_required()] or list(kind.model_fields)
        return f"a table with {', '.join(needed)}"
    if get_origin(kind) is Literal:
        return "one of " + ", ".join(json.dumps(one) for one in get_args(kind))
    words = {
        str: "text in quotes",
        float: "a number",
        int: "a whole number",
        bool: "true or false",
        datetime: "a date and time",
    }
    return words.get(kind) or {tuple: "a list [ ... ]", dict: "a table"}.get(get_origin(kind) or kind, "a value")


def _nearest(record: type[Written], location: Location) -> str:
    holder = _annotation(record, location[:-1])
    known = list(holder.model_fields) if isinstance(holder, type) and issubclass(holder, Written) else []
    near = difflib.get_close_matches(str(location[-1]), known, n=1)
    return f'did you mean "{near[0]}"?' if near else f"expected one of {', '.join(known)}"


def _shown(value: Any) -> str:
    """A value as TOML writes it, cut where it gets long."""
    if isinstance(value, dict) and value:
        return _short("{ " + ", ".join(f"{key} = {_shown(one)}" for key, one in value.items()) + " }")
    if isinstance(value, list | tuple):
        return _short("[" + ", ".join(_shown(one) for one in value) + "]")
    # repr writes floats as TOML does, nan and inf included; JSON does so for text and for true and false.
    return _short(repr(value) if isinstance(value, float) else json.dumps(value, ensure_ascii=False, default=str))


def _short(text: str) -> str:
    text = _PASSWORD.sub(lambda found: f"{found[1] or found[3]}***{found[2] or ''}", text)
    return text if len(text) <= _LONGEST else text[: _LONGEST - 4] + " ..."


def _as_text(value: Any) -> str:
    if isinstance(value, datetime | date | time):
        return value.isoformat()
    raise TypeError(f"TOML holds no {type(value)}")
