"""Command lines in documents: found in fenced blocks, and held against the commands and options that exist."""

import re
import shlex
from collections.abc import Iterator

from tests.house.commands import commands

_FENCED = re.compile(r"^```(\w*)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
_PBM = re.compile(r"(?:^|[/|;&(] ?)(pbm [a-z-][^|;&`\n]*)")


def fenced(text: str, language: str) -> list[str]:
    """The fenced blocks of a document in one language."""
    return [block for found, block in _FENCED.findall(text) if found == language]


def command_lines(text: str) -> Iterator[str]:
    """Every `pbm ...` that a document tells to type: in its fenced blocks after a prompt, in shell blocks, and in code spans."""
    typed = [
        line.removeprefix("$ ") for _, block in _FENCED.findall(text) for line in block.splitlines() if line[:2] == "$ "
    ]
    shell = [line for block in fenced(text, "sh") for line in block.splitlines()]
    spans = re.findall(r"`([^`\n]+)`", _FENCED.sub("", text))
    for line in [*typed, *shell, *spans]:
        yield from (found.strip() for found in _PBM.findall(line))


def unknown_parts(line: str) -> list[str]:
    """Which command or options of a `pbm ...` line do not exist."""
    known = {one.name: {*one.options, "--help"} for one in commands()}
    words = shlex.split(line, comments=True)[1:]
    name = next((name for n in (2, 1) if (name := " ".join(words[:n])) in known), words[0] if words else "")
    name = "" if name.startswith("-") else name
    if name not in known:
        return [name]
    options = [word.partition("=")[0] for word in words if re.match(r"--\w", word)]
    return [option for option in options if option not in known[name]]
