"""Every key of a file that a record describes: its type in words, its default, and its meaning from the record's own docstring."""

import json
import re
from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import date, datetime
from inspect import cleandoc
from types import UnionType
from typing import Annotated, Any, Literal, Union, get_args, get_origin

from pydantic import AfterValidator, BaseModel, BeforeValidator
from pydantic.fields import FieldInfo

Record = type[BaseModel]
NAMES = {
    float: "number",
    int: "whole number",
    str: "text",
    bool: "true or false",
    datetime: "date and time",
    date: "date",
}
_LISTED = re.compile(r"^Attributes\n-+\n(.*)", re.MULTILINE | re.DOTALL)


@dataclass(frozen=True)
class Section:
    """One record and the places in the file where it stands."""

    record: Record
    places: tuple[str, ...]

    @property
    def summary(self) -> str:
        """What the record is, from the first paragraph of its docstring."""
        return " ".join(cleandoc(self.record.__doc__ or "").split("\n\n")[0].split())


def sections(root: Record) -> list[Section]:
    """The records of a file from its outermost inwards; what is inside of one is told where it is met first."""
    places: dict[Record, list[str]] = {root: [""]}
    waiting = deque([root])
    while waiting:
        record = waiting.popleft()
        for name, field in record.model_fields.items():
            inner, step = _record_in(field.annotation)
            if inner is None:
                continue
            if inner not in places:
                waiting.append(inner)
            places.setdefault(inner, []).append(".".join(filter(None, (places[record][0], name + step))))
    return [Section(record, tuple(where)) for record, where in places.items()]


def _record_in(kind: Any, step: str = "") -> tuple[Record | None, str]:
    """The record inside a type, and what the path to it gets: ".NAME" in a table of tables."""
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        return kind, step
    for part in get_args(kind):
        inner, further = _record_in(part, step + ".NAME" if get_origin(kind) is dict else step)
        if inner is not None:
            return inner, further
    return None, step


def meanings(record: Record) -> dict[str, str]:
    """Meaning of each key, from the Attributes section of the record's docstring.

    Raises
    ------
    LookupError
        If a key has none.
    """
    listed = _LISTED.search(cleandoc(record.__doc__ or ""))
    told: dict[str, str] = {}
    for entry in re.split(r"\n(?=\S)", listed[1] if listed else ""):
        names, _, meaning = entry.partition("\n")
        told |= dict.fromkeys(names.split(", "), " ".join(meaning.split()))
    if missing := [name for name in record.model_fields if not told.get(name)]:
        raise LookupError(f"{record.__module__}.{record.__name__} does not say what {', '.join(missing)} means")
    return told


def type_in_words(field: FieldInfo, linked: Callable[[Record], str], none: str = "") -> str:
    """What a key holds; `linked` makes the reference to a record's own section, `none` is what stands for nothing."""
    words = _in_words(field.annotation, tuple(field.metadata), linked)
    return f"{words} or {none}" if none and type(None) in get_args(field.annotation) else words


def _in_words(kind: Any, marks: tuple[Any, ...], linked: Callable[[Record], str]) -> str:
    if get_origin(kind) is Annotated:
        return _in_words(get_args(kind)[0], (*marks, *get_args(kind)[1:]), linked)
    if checked := [mark for mark in marks if isinstance(mark, AfterValidator | BeforeValidator)]:
        return _expected_by(checked[0].func)
    if get_origin(kind) in (Union, UnionType):
        return " or ".join(_in_words(one, marks, linked) for one in get_args(kind) if one is not type(None))
    if get_origin(kind) is Literal:
        return " or ".join(f"`{json.dumps(one)}`" for one in get_args(kind))
    if get_origin(kind) is tuple:
        return _list_in_words(get_args(kind), linked)
    if get_origin(kind) is dict:
        return f"table, NAME = {_in_words(get_args(kind)[1], (), linked)}"
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        return linked(kind)
    return " ".join(filter(None, (NAMES[kind], _bounds(marks))))


def _list_in_words(entries: tuple[Any, ...], linked: Callable[[Record], str]) -> str:
    count = "" if Ellipsis in entries else f"{len(entries)} "
    return f"list of {count}({_in_words(entries[0], (), linked)})"


def _expected_by(check: Callable[[str], object]) -> str:
    """What a check of the record says it expected; every check of text refuses an empty one."""
    try:
        check("")
    except ValueError as error:
        return str(error).removeprefix("expected ")
    raise LookupError(f"{check} takes an empty text")


def _bounds(marks: tuple[Any, ...]) -> str:
    limits = _limits(marks)
    words = {"gt": "above", "ge": "at least", "lt": "below", "le": "at most"}
    return ", ".join(f"{words[name]} {limits[name]:g}" for name in words if name in limits)


def _limits(marks: tuple[Any, ...]) -> dict[str, float]:
    """Bounds among the marks of a type; a `Field` inside a type carries its own marks."""
    found: dict[str, float] = {}
    for mark in marks:
        if isinstance(mark, FieldInfo):
            found |= _limits(tuple(mark.metadata))
        found |= {name: getattr(mark, name) for name in ("gt", "ge", "lt", "le") if hasattr(mark, name)}
    return found


def default_in_words(field: FieldInfo) -> str:
    """What holds where a key is left out: "required", nothing, or the value as TOML writes it."""
    if field.is_required():
        return "required"
    value = field.get_default(call_default_factory=True)
    return "" if value is None or value in ((), {}) or _says_nothing(value) else f"`{_as_toml(value)}`"


def _says_nothing(value: Any) -> bool:
    return isinstance(value, BaseModel) and not value.model_fields_set


def _as_toml(value: Any) -> str:
    if isinstance(value, BaseModel):
        said = ", ".join(f"{name} = {_as_toml(getattr(value, name))}" for name in _told_by(value))
        return f"{{ {said} }}"
    if isinstance(value, tuple):
        return f"[{', '.join(_as_toml(one) for one in value)}]"
    if isinstance(value, bool | int | float):
        return json.dumps(int(value) if value == int(value) and not isinstance(value, bool) else value)
    return json.dumps(str(value))


def _told_by(value: BaseModel) -> Iterator[str]:
    """Keys that were given, in the record's order."""
    return (name for name in type(value).model_fields if name in value.model_fields_set)
