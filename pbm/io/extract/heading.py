"""The header line of a text extract: which line it is, which sign parts its columns, and where the columns of `lab.toml` are."""

import csv
import difflib
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from pbm.errors import InputError
from pbm.records.intake import ROLES
from pbm.records.laboratory import Extract

_DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "vertical bar"}
_SEARCHED = 20  # lines: reports may put a title above their table


@dataclass(frozen=True, slots=True)
class Heading:
    """Line number of the header (from 1), the delimiter, the number of columns, and the column of each role."""

    line: int
    delimiter: str
    width: int
    places: dict[str, int]

    @property
    def delimiter_name(self) -> str:
        """The delimiter in words."""
        return _DELIMITERS.get(self.delimiter, f'"{self.delimiter}"')


def wanted_columns(columns: Extract) -> dict[str, str]:
    """Role -> name of its column, for the roles that `lab.toml` gives a column."""
    return {role: name for role in ROLES if (name := getattr(columns, role)) is not None}


def find_heading(path: Path, text: str, columns: Extract) -> Heading:
    """Find the header line at the start of an extract.

    Parameters
    ----------
    path
        The file, for messages.
    text
        Its beginning.
    columns
        What `lab.toml` says.

    Raises
    ------
    InputError
        If no line holds any of the columns, if some are missing, or if one occurs twice.
    """
    wanted = wanted_columns(columns)
    delimiters = [columns.delimiter] if columns.delimiter else list(_DELIMITERS)
    lines = text.split("\n")[:_SEARCHED]
    tried = [(number, sign, _names(line, sign)) for number, line in enumerate(lines, start=1) for sign in delimiters]
    # The first best: a line with more of the columns wins, then the earlier line, then the likelier sign.
    line, delimiter, names = max(tried, key=lambda one: (len(set(wanted.values()) & set(one[2])), -one[0]))
    if not set(wanted.values()) & set(names):
        # The line itself is not shown: it may be a patient's.
        raise InputError(
            f"{path} has no header line: none of the columns that lab.toml names ({_quoted(wanted.values())}) is in its first "
            f"{len(lines)} lines. Put a header line on top, or correct [extract] in lab.toml."
        )
    check_columns(path, names, columns)
    return Heading(line, delimiter, len(names), {role: names.index(name) for role, name in wanted.items()})


def check_columns(path: Path, names: list[str], columns: Extract) -> None:
    """See that every column that `lab.toml` names is there, once.

    Raises
    ------
    InputError
        If not; the text says which is missing and which name is nearest.
    """
    wanted = wanted_columns(columns)
    missing = [f'{role} = "{name}"{_nearest(name, names)}' for role, name in wanted.items() if name not in names]
    if missing:
        raise InputError(
            f"{path} lacks what lab.toml names under [extract]: {', '.join(missing)}. Its columns are {_quoted(names)}. "
            "Correct [extract] in lab.toml, or export the file with these columns."
        )
    if twice := [name for name in dict.fromkeys(wanted.values()) if names.count(name) > 1]:
        raise InputError(
            f"{path} has more than one column named {_quoted(twice)}. Give the columns different names and export again."
        )


def _names(line: str, delimiter: str) -> list[str]:
    try:
        return [name.strip("\ufeff \t") for name in next(csv.reader([line.strip("\r")], delimiter=delimiter), [])]
    except csv.Error:
        return []


def _nearest(name: str, names: list[str]) -> str:
    folded = {one.casefold(): one for one in names}
    near = difflib.get_close_matches(name.casefold(), list(folded), n=1)
    return f' (did you mean "{folded[near[0]]}"?)' if near else ""


def _quoted(names: Iterable[str]) -> str:
    shown = [f'"{name[:40]}"' for name in names]
    return ", ".join(shown[:25]) + (" ..." if len(shown) > 25 else "")
