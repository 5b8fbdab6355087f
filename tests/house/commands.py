"""The commands as their functions declare them: usage, help, example, arguments and options. Nothing is asked of the terminal."""

import inspect
import re
from collections.abc import Iterator
from dataclasses import dataclass
from enum import Enum
from types import UnionType
from typing import Annotated, Any, Union, get_args, get_origin, get_type_hints

from typer.models import ArgumentInfo, OptionInfo

from pbm.commands.main import app

HOLDS = {"str": "text", "int": "whole number", "float": "number", "Path": "path", "bool": ""}


@dataclass(frozen=True)
class Parameter:
    """An argument or an option of a command: how it is written, what it holds, what holds without it, what it means."""

    written: str
    holds: str
    default: str
    help: str
    required: bool


@dataclass(frozen=True)
class Command:
    """A command; without a name, `pbm` itself."""

    name: str
    paragraphs: tuple[str, ...]
    example: str
    parameters: tuple[Parameter, ...]

    @property
    def title(self) -> str:
        """As it is called."""
        return f"pbm {self.name}".strip()

    @property
    def options(self) -> tuple[str, ...]:
        """Names of its options."""
        written = (one.written for one in self.parameters if one.written.startswith("-"))
        return tuple(name for names in written for name in re.split(r"/|, ", names))

    @property
    def usage(self) -> str:
        """How it is written."""
        needed = [f"{one.written} {one.holds}" for one in self.parameters if one.required and _is_option(one)]
        arguments = [one.written for one in self.parameters if not _is_option(one)]
        return " ".join([self.title, *needed, *(arguments if self.name else ["COMMAND"]), "[OPTIONS]"])


def _is_option(one: Parameter) -> bool:
    return one.written.startswith("-")


def commands() -> list[Command]:
    """`pbm` and its commands in the order in which its help shows them."""
    own = app.info.help
    root = app.registered_callback
    assert root is not None
    assert root.callback is not None
    first = Command("", tuple(str(own).split("\n\n")), "", tuple(_parameters(root.callback)))
    grouped = [
        _command(f"{group.name} {one.name}", one.callback)
        for group in app.registered_groups
        if group.typer_instance is not None
        for one in group.typer_instance.registered_commands
    ]
    return [first, *(_command(one.name, one.callback) for one in app.registered_commands), *grouped]


def _command(name: str | None, function: Any) -> Command:
    told = [" ".join(paragraph.split()) for paragraph in (inspect.getdoc(function) or "").split("\n\n")]
    examples = [one.removeprefix("Example:").strip() for one in told if one.startswith("Example:")]
    return Command(
        name or function.__name__,
        tuple(one for one in told if not one.startswith("Example:")),
        examples[0] if examples else "",
        tuple(_parameters(function)),
    )


def _parameters(function: Any) -> Iterator[Parameter]:
    hints = get_type_hints(function, include_extras=True)
    for name, declared in inspect.signature(function).parameters.items():
        hint, value = hints[name], declared.default
        if get_origin(hint) is Annotated:
            hint, info = get_args(hint)
        else:
            info, value = value, value.default
        required = value is inspect.Parameter.empty
        yield Parameter(_written(name, info), _holds(hint, info), _default(value, info), info.help or "", required)


def _written(name: str, info: ArgumentInfo | OptionInfo) -> str:
    if isinstance(info, ArgumentInfo):
        return info.metavar or name.upper()
    # Inside Annotated the first name stands where a default would.
    names = [one for one in (info.default, *(info.param_decls or ())) if isinstance(one, str)]
    return ", ".join(names) or f"--{name.replace('_', '-')}"


def _holds(hint: Any, info: ArgumentInfo | OptionInfo) -> str:
    if isinstance(info, OptionInfo) and info.metavar:
        return info.metavar
    given = (
        [one for one in get_args(hint) if one is not type(None)] if get_origin(hint) in (Union, UnionType) else [hint]
    )
    kind = get_args(given[0])[0] if get_origin(given[0]) is list else given[0]
    least = f", at least {info.min:g}" if info.min is not None else ""
    if issubclass(kind, Enum):
        return " or ".join(one.value for one in kind)
    return HOLDS[kind.__name__] + least


def _default(value: Any, info: ArgumentInfo | OptionInfo) -> str:
    if value is inspect.Parameter.empty:
        return "required"
    if isinstance(info.show_default, str):
        return info.show_default
    return "" if value is None or value is False else f"`{value}`"
