"""Documents: links lead somewhere, TOML is taken as it stands, command lines exist, every idea and command has its page."""

import re
import tomllib
from collections.abc import Iterator
from pathlib import Path
from urllib.parse import unquote

import pytest

from pbm.records.laboratory import Lab
from pbm.records.plan import MonitorPlan
from tests.house.command_lines import command_lines, fenced, unknown_parts
from tests.house.reference import anchor
from tests.house.small_laboratory import readme_lab

TOP = Path(__file__).parents[2]
DOCUMENTS = sorted(
    path.relative_to(TOP).as_posix()
    for path in (TOP / "README.md", TOP / "DEVELOPERS.md", *(TOP / "docs").rglob("*.md"))
)
_LINK = re.compile(r"\[[^\]]*\]\(([^)\s]+)\)")
_HEADING = re.compile(r"^#+ (.*)$", re.MULTILINE)


def text_of(document: str) -> str:
    return (TOP / document).read_text(encoding="utf-8")


def prose(text: str) -> str:
    """Without fenced blocks and code spans."""
    return re.sub(r"`[^`\n]*`", "", re.sub(r"^```.*?^```$", "", text, flags=re.MULTILINE | re.DOTALL))


@pytest.mark.parametrize("document", DOCUMENTS)
def test_every_link_leads_to_a_file_and_a_heading_that_exist(document: str):
    for target in _LINK.findall(prose(text_of(document))):
        if target.startswith(("http:", "https:")):
            continue
        path, _, heading = unquote(target).partition("#")
        file = ((TOP / document).parent / path).resolve() if path else TOP / document
        assert file.exists(), f"{document} -> {target}"
        if heading:
            assert heading in map(anchor, _HEADING.findall(file.read_text(encoding="utf-8"))), f"{document} -> {target}"


@pytest.mark.parametrize("document", DOCUMENTS)
def test_every_command_line_uses_commands_and_options_that_exist(document: str):
    wrong = {line: unknown for line in command_lines(text_of(document)) if (unknown := unknown_parts(line))}
    assert not wrong


def toml_blocks() -> Iterator[tuple[str, str]]:
    return ((document, block) for document in DOCUMENTS for block in fenced(text_of(document), "toml"))


@pytest.mark.parametrize(("document", "block"), list(toml_blocks()), ids=lambda text: text.split("\n")[0])
def test_every_block_of_toml_is_taken(document: str, block: str):
    """A block is a whole lab.toml, some tables of one (put over those of the README's), or monitors of a plan."""
    found = tomllib.loads(block)
    if "streams" in found:
        for stream in found["streams"].values():
            assert [MonitorPlan.model_validate(one) for one in stream["monitors"]]
    else:
        Lab.model_validate(laid_over(tomllib.loads(readme_lab()), found))


def laid_over(below: dict[str, object], above: dict[str, object]) -> dict[str, object]:
    """Tables of one document over those of another."""
    laid = dict(below)
    for key, value in above.items():
        under = below.get(key)
        laid[key] = laid_over(under, value) if isinstance(under, dict) and isinstance(value, dict) else value
    return laid


def test_every_page_is_reached_from_the_front_page_of_the_docs():
    front = text_of("docs/README.md")
    reached = {target.partition("#")[0] for target in _LINK.findall(front)}
    pages = {path.relative_to(TOP / "docs").as_posix() for path in (TOP / "docs").rglob("*.md")} - {"README.md"}
    assert pages <= reached


def test_every_idea_names_its_source_and_its_bounds():
    for path in (TOP / "docs" / "ideas").glob("*.md"):
        if path.name != "notebook.md":
            headings = _HEADING.findall(path.read_text(encoding="utf-8"))
            assert {"Symbols", "Where it stops being valid", "Source"} <= set(headings), path.name
