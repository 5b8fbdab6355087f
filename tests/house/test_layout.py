"""Where everything lives: nothing else at the top, one idea a module named in its first line, modules and functions of a readable size."""

import ast
from collections.abc import Iterator
from fnmatch import fnmatch
from pathlib import Path

import pytest

TOP = Path(__file__).parents[2]
AT_THE_TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "pbm", "tests", "synthetic_streams", "docs"}
IN_THE_HOUSE = {"methods", "records", "stages", "io", "bench", "commands"}
LINES_OF_A_MODULE, LINES_OF_A_FUNCTION = 300, 40
# One compiled law over rules, sequences and measurements; parts of it would each need all of its state.
LONGER_FUNCTIONS = {"pbm/methods/control_judge.py: accepts"}

MODULES = sorted(
    path.relative_to(TOP).as_posix() for part in ("pbm", "synthetic_streams") for path in (TOP / part).rglob("*.py")
)
TESTS = sorted(path.relative_to(TOP).as_posix() for path in (TOP / "tests").rglob("*.py") if path.stat().st_size)


Documented = ast.Module | ast.ClassDef | ast.FunctionDef | ast.AsyncFunctionDef


def ignored(name: str) -> bool:
    """Whether git is told not to look at it."""
    patterns = (TOP / ".gitignore").read_text(encoding="utf-8").split()
    return any(fnmatch(name, pattern.rstrip("/")) for pattern in patterns)


def test_nothing_lies_at_the_top_but_what_belongs_there():
    found = {path.name for path in TOP.iterdir() if not path.name.startswith(".") and not ignored(path.name)}
    assert found <= AT_THE_TOP


def test_the_house_has_its_rooms_and_no_others():
    found = {path.name for path in (TOP / "pbm").iterdir() if path.is_dir() and path.name != "__pycache__"}
    assert found <= IN_THE_HOUSE


@pytest.mark.parametrize("module", [*MODULES, *TESTS])
def test_the_first_line_of_a_module_names_its_idea(module: str):
    text = (TOP / module).read_text(encoding="utf-8")
    assert text.startswith('"""')
    assert len((ast.get_docstring(ast.parse(text)) or "").splitlines()[0]) > 10


@pytest.mark.parametrize("module", MODULES)
def test_a_module_and_its_functions_are_of_a_readable_size(module: str):
    """Lines of docstrings are not counted: shapes, units and sources are wanted, and no reason to split a thing."""
    text = (TOP / module).read_text(encoding="utf-8")
    tree = ast.parse(text)
    assert len(text.splitlines()) - sum(told(node) for node in documented(tree)) <= LINES_OF_A_MODULE
    long = {
        f"{module}: {node.name}"
        for node in documented(tree)
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef) and length(node) > LINES_OF_A_FUNCTION
    }
    assert long <= LONGER_FUNCTIONS


def documented(tree: ast.Module) -> Iterator[Documented]:
    """What can have a docstring."""
    return (node for node in ast.walk(tree) if isinstance(node, Documented))


def told(node: Documented) -> int:
    """Lines of its own docstring."""
    first = node.body[0] if ast.get_docstring(node) is not None else None
    return 0 if first is None else (first.end_lineno or 0) - first.lineno + 1


def length(node: ast.FunctionDef | ast.AsyncFunctionDef) -> int:
    """Lines from `def` to the end, less its docstring."""
    return (node.end_lineno or 0) - node.lineno + 1 - told(node)
