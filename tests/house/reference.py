"""Write docs/reference/ from the code: commands, keys of lab.toml and plan.toml, survey.json, appraisal.json, tables of the store.

Run as `python -m tests.house.reference` at the top of the tree. Nothing here depends on the terminal or on the day.
"""

import json
import re
from collections.abc import Iterable, Iterator
from functools import partial
from itertools import groupby
from operator import itemgetter
from pathlib import Path
from typing import Any

from sqlalchemy import Column, Table

from pbm.io.store_schema import SCHEMA_VERSION, metadata
from pbm.records.appraisal import Appraisal
from pbm.records.laboratory import Lab
from pbm.records.plan import PARAMETER_KEYS, Plan
from pbm.records.survey import Survey
from tests.house.commands import Command, Parameter, commands
from tests.house.keys import Record, default_in_words, meanings, sections, type_in_words

TOP = Path(__file__).parents[2]
FOLDER = TOP / "docs" / "reference"
NOTE = "Written from the code by `python -m tests.house.reference`; do not edit."


def pages() -> dict[str, str]:
    """Every page of the reference, by its file name."""
    made = {
        "commands.md": _commands_page(),
        "lab-toml.md": _file_page("lab.toml", Lab, _LAB),
        "plan-toml.md": _file_page("plan.toml", Plan, _PLAN),
        "survey-json.md": _written_page("reports/survey.json", Survey, _SURVEY),
        "appraisal-json.md": _written_page("reports/appraisal.json", Appraisal, _APPRAISAL),
        "appraisal.schema.json": [json.dumps(Appraisal.model_json_schema(), indent=1)],
        "store.md": _store_page(),
    }
    return {name: "\n".join(lines) + "\n" for name, lines in made.items()}


_LAB = (
    "Written by people: the laboratory, the columns of its extracts, analytes, TEa, controls, alarm budget. An unknown key, a wrong type "
    "or an impossible number stops a command; all mistakes are told at once, each with its key, what was found and what was expected.",
)
_PLAN = (
    "Written by `pbm tune`: what each stream's monitor is, its limits, and where they came from. A person may edit it; `pbm appraise` then "
    "judges the edited plan.",
    "",
    "Which keys describe which statistic, beside its centre (`level` may be given with any):",
    "",
    *(f"- `{name}`: {', '.join(f'`{key}`' for key in keys)}" for name, keys in PARAMETER_KEYS.items()),
)
_SURVEY = ("Written by `pbm survey`. The same survey gives the same bytes; numbers are written with all their digits.",)
_APPRAISAL = (
    "Written by `pbm appraise`. The same history, plan, laboratory file and seed give the same bytes; figures have seven significant "
    "digits. The same as a JSON schema for programs: [appraisal.schema.json](appraisal.schema.json). `version` rises when the layout "
    "changes, and what is written by a newer version is refused by an older one.",
)


def _file_page(file: str, root: Record, head: tuple[str, ...]) -> Iterator[str]:
    """A file that people write: each record under the places where it stands, with defaults."""
    every = sections(root)
    headings = {one.record: " and ".join(one.places) or "The whole file" for one in every}
    yield from (f"# {file}", "", NOTE, "", *head)
    for section in every:
        yield from ("", f"## {headings[section.record]}", "", section.summary, "")
        yield from _table_head(("key", "type", "default", "meaning"))
        means = meanings(section.record)
        yield from _grouped(
            (name, (type_in_words(field, partial(_link, headings)), default_in_words(field), means[name]))
            for name, field in section.record.model_fields.items()
        )


def _written_page(file: str, root: Record, head: tuple[str, ...]) -> Iterator[str]:
    """A file that the tool writes, with every key: each record under its name, since the same one stands in many places."""
    every = sections(root)
    headings = {one.record: _words(one.record.__name__) for one in every}
    yield from (f"# {file}", "", NOTE, "", *head)
    for section in every:
        yield from ("", f"## {headings[section.record]}", "", section.summary, "")
        yield from _table_head(("key", "type", "meaning"))
        means = meanings(section.record)
        yield from _grouped(
            (name, (type_in_words(field, partial(_link, headings), none="null"), means[name]))
            for name, field in section.record.model_fields.items()
        )


def _grouped(told: Iterable[tuple[str, tuple[str, ...]]]) -> Iterator[str]:
    """A row for each key; keys next to each other of which the same is told share one."""
    for cells, same in groupby(told, key=itemgetter(1)):
        yield _row([", ".join(f"`{name}`" for name, _ in same), *cells])


def _link(headings: dict[Record, str], record: Record) -> str:
    return f"[{headings[record]}](#{anchor(headings[record])})"


def _words(name: str) -> str:
    """ "ResultsUntil" -> "Results until"."""
    return re.sub(r"(?<=[a-z])(?=[A-Z])", " ", name).capitalize()


def anchor(heading: str) -> str:
    """The anchor that a Markdown reader gives a heading."""
    return re.sub(r"[^\w\- ]", "", heading.lower()).replace(" ", "-")


def _commands_page() -> Iterator[str]:
    yield from ("# Commands", "", NOTE, "")
    yield "Exit codes: 0 done; 1 the answer is no; 2 wrong use or input. Errors go to standard error in one paragraph."
    for command in commands():
        yield from ("", f"## {command.title}", "")
        yield from _command(command)


def _command(command: Command) -> Iterator[str]:
    yield f"    {command.usage}"
    for paragraph in command.paragraphs:
        yield from ("", paragraph)
    if command.example:
        yield from ("", "Example:", "", f"    {command.example}")
    if command.parameters:
        yield ""
        yield from _table_head(("argument or option", "holds", "default", "meaning"))
        yield from (_row(_cells(one)) for one in command.parameters)


def _cells(one: Parameter) -> list[str]:
    return [f"`{one.written}`", one.holds, one.default, one.help]


def _store_page() -> Iterator[str]:
    yield from ("# watch.sqlite", "", NOTE, "")
    yield (
        f"Layout {SCHEMA_VERSION}. Written by `pbm watch` alone; other programs open it read-only. Times are UTC microseconds since 1970. "
        "With `store` in lab.toml the same tables stand in the schema `watch` of that PostgreSQL database."
    )
    for table in metadata.sorted_tables:
        yield from ("", f"## {table.name}", "", *([table.comment, ""] if table.comment else []))
        yield from _columns(table)


def _columns(table: Table) -> Iterator[str]:
    yield from _table_head(("column", "type", "may be empty", "meaning"))
    for column in table.columns:
        yield _row(
            [f"`{column.name}`", _column_type(column), "yes" if column.nullable else "", _column_meaning(column)]
        )


def _column_type(column: "Column[Any]") -> str:
    return type(column.type).__visit_name__.replace("_", " ")


def _column_meaning(column: "Column[Any]") -> str:
    points_to = [f"-> {key.target_fullname}" for key in column.foreign_keys]
    return "; ".join(filter(None, (*points_to, column.comment)))


def _table_head(names: tuple[str, ...]) -> Iterator[str]:
    yield _row(list(names))
    yield "|---" * len(names) + "|"


def _row(cells: list[str]) -> str:
    return f"| {' | '.join(cell.replace('|', '/') for cell in cells)} |"


def main() -> None:
    """Write the pages, and take away those that are no longer made."""
    FOLDER.mkdir(parents=True, exist_ok=True)
    made = pages()
    for name, text in made.items():
        (FOLDER / name).write_text(text, encoding="utf-8")
    for path in FOLDER.iterdir():
        if path.name not in made:
            path.unlink()


if __name__ == "__main__":
    main()
